"""Calibration shots to the values of a rig: wave speed, Poisson's ratio, sensitivities, propagation, with covariance.

Along the flow: :mod:`~shpb.calibrate.session_file` reads what was fired, each method makes
:class:`~shpb.calibrate.determination.Determination` values of it, and all together become one dated
:class:`~shpb.rig.calibration.Calibration`.
"""
