"""Indentation of the bar faces: the approach of the bars is more than the specimen is shortened by."""

from __future__ import annotations

import numpy as np

from shpb.arrays import FloatArray
from shpb.response.corrections.correction import Loading, Off, Report
from shpb.response.corrections.facts import MOST_RADIUS
from shpb.settings import Correction
from shpb.wave.indentation import face_indentation_m


def indentation(shot: Loading) -> Report:
    """Strain that both bar faces add, with the specimen's current radius: u = K F (1 - nu^2)/(E a_s) each."""
    strain = indentation_strain(shot)
    refused = ""
    if not shot.compressed:
        refused = "the specimen does not press on the bar faces"
    else:
        ratio = shot.greatest(shot.radius_m) / _thinner_radius(shot)
        if ratio > MOST_RADIUS:
            refused = f"the specimen grows to {ratio:.2f} of the bar's radius"
    return Report(
        correction=Correction.INDENTATION,
        brief=f"{shot.greatest(strain):.4f} of strain" if shot.compressed else "",
        size=f"up to {shot.greatest(strain):.4f} of strain",
        thinned=Off(strain=strain),
        refused=refused,
    )


def indentation_strain(shot: Loading) -> FloatArray:
    """Engineering strain that both bar faces add by giving way, shape (samples,); zero in tension."""
    if not shot.compressed:
        return np.zeros_like(shot.time_s)
    radius, rig, motion = shot.radius_m, shot.rig, shot.motion
    total = face_indentation_m(motion.force_in_n, radius, rig.incident_bar) + face_indentation_m(
        motion.force_out_n, radius, rig.transmitted_bar
    )
    strain: FloatArray = total / shot.specimen.length_m
    return strain


def _thinner_radius(shot: Loading) -> float:
    return min(shot.rig.incident_bar.radius_m, shot.rig.transmitted_bar.radius_m)
