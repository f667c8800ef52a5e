"""Raw records in: one small reader per format, chosen by content, not by name alone.

Along the flow: :mod:`~shpb.record.registry` finds the reader of a file, the reader hands over a
:class:`~shpb.record.raw.RawTable`, :mod:`~shpb.record.clock` finds the time base,
:mod:`~shpb.record.channels` makes named channels in volts, and :mod:`~shpb.record.read` puts the
:class:`~shpb.record.record.Record` together. How to add a reader: :mod:`shpb.record.raw`.
"""
