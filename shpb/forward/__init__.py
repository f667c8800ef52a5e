"""The shot run forwards: striker, shaper, bars, specimen and scope, from a plan to what the gauges see.

Used for the demo campaign, for closure (the reduced curve run forwards against the record) and for
planning a shot. Loading is positive throughout; the wiring's sign enters only in :mod:`.recording`.
"""
