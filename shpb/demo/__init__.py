"""The demo campaign: an invented laboratory's shots, written as a lab would have them."""

from shpb.demo.campaign import DemoCampaign, WrittenShot, write_demo
from shpb.demo.merge_scenario import merge_shots
from shpb.demo.planted import planted_johnson_cook, planted_peak_k, planted_stress_pa
from shpb.demo.scenario import DemoShot, Expected, demo_shot, demo_shots
from shpb.demo.truth import DemoTruth, demo_truth

__all__ = [
    "DemoCampaign",
    "DemoShot",
    "DemoTruth",
    "Expected",
    "WrittenShot",
    "demo_shot",
    "demo_shots",
    "demo_truth",
    "merge_shots",
    "planted_johnson_cook",
    "planted_peak_k",
    "planted_stress_pa",
    "write_demo",
]
