"""The demo campaign: an invented laboratory's shots, written as a lab would have them."""

from shpb.demo.campaign import DemoCampaign, WrittenShot, write_demo
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
    "write_demo",
]
