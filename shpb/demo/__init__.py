"""The demo campaign: an invented laboratory's shots, written as a lab would have them."""

from shpb.demo.calibration_scenario import calibration_truths
from shpb.demo.calibration_truth import CalibrationTruth
from shpb.demo.campaign import (
    DemoCalibration,
    DemoCampaign,
    WrittenSession,
    WrittenShot,
    write_calibration_demo,
    write_demo,
)
from shpb.demo.merge_scenario import merge_shots
from shpb.demo.planted import planted_johnson_cook, planted_peak_k, planted_stress_pa
from shpb.demo.scenario import DemoShot, Expected, demo_shot, demo_shots
from shpb.demo.truth import DemoTruth, demo_truth

__all__ = [
    "CalibrationTruth",
    "DemoCalibration",
    "DemoCampaign",
    "DemoShot",
    "DemoTruth",
    "Expected",
    "WrittenSession",
    "WrittenShot",
    "calibration_truths",
    "demo_shot",
    "demo_shots",
    "demo_truth",
    "merge_shots",
    "planted_johnson_cook",
    "planted_peak_k",
    "planted_stress_pa",
    "write_calibration_demo",
    "write_demo",
]
