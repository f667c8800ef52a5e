"""Merging a campaign: quasi-static curves with shots, repeats, sensitivities, constitutive laws.

Constitutive side: :class:`~shpb.merge.points.FlowPoints` go with a law of :mod:`shpb.merge.models` into
:func:`~shpb.merge.fit.fit_model`, which gives a :class:`~shpb.merge.model_fit.ModelFit`.
"""
