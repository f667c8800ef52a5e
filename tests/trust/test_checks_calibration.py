"""Checks of the calibration in force: quiet while it holds, speaking outside its days and after a change."""

from __future__ import annotations

import dataclasses

import pytest

from shpb.limits import Limits
from shpb.quantity import Quantity
from shpb.reduction import ShotResult, reduce
from shpb.rig.calibration import (
    BarCalibration,
    Calibration,
    GaugeCalibration,
    stated_of,
    stated_of_bar,
)
from shpb.rig.correlations import Correlation
from shpb.rig.rig import Rig
from shpb.settings import DEFAULT, Dispersion
from shpb.trust.finding import Verdict, Weight
from tests.synthetic import FaceStrains, gauge, record_of, rig, steel_bar
from tests.trust.shots import finding, good_sheet, has, run

Q = Quantity


def calibration(lab: Rig, **changes: object) -> Calibration:
    """The true values of the closed-form rig, measured: 5000 m/s, gauge factor 2.1."""
    values: dict[str, object] = {
        "name": "spring",
        "rig": lab.name,
        "date": "2031-02-03",
        "holds_days": 100,
        "bars": {
            "incident_bar": BarCalibration(
                wave_speed_m_s=Q(5000.0, 0.8), as_stated=stated_of_bar(lab.incident_bar)
            ),
            "transmitted_bar": BarCalibration(
                wave_speed_m_s=Q(5000.0, 0.9), as_stated=stated_of_bar(lab.transmitted_bar)
            ),
        },
        "gauges": {
            "incident_gauge": GaugeCalibration(
                gauge_factor=Q(2.1, 0.004),
                to_specimen_m=Q(1.0, 2e-4),
                as_stated=stated_of(lab.incident_gauge),
            ),
            "transmitted_gauge": GaugeCalibration(
                gauge_factor=Q(2.1, 0.004), as_stated=stated_of(lab.transmitted_gauge)
            ),
        },
        "correlations": (
            Correlation("incident gauge factor", "transmitted gauge factor", 0.9),
            Correlation("incident bar: wave speed", "incident gauge distance", 0.3),
            Correlation(
                "incident gauge factor", "incident gauge 2 factor", 0.5
            ),  # no part of a shot's budget
        ),
    }
    return Calibration(**{**values, **changes})  # type: ignore[arg-type]


def shot(faces: FaceStrains, lab: Rig, by: Calibration, **sheet: object) -> ShotResult:
    return run(faces, lab.calibrated(by), good_sheet(**sheet))


def test_a_calibration_in_force_is_quiet(faces: FaceStrains) -> None:
    lab = rig()
    result = shot(faces, lab, calibration(lab))
    assert finding(result, "calibration date").weight is Weight.FINE
    assert finding(result, "calibration date").measured == "shot 14 days after the calibration spring"
    assert (
        finding(result, "calibration date").limit
        == "0 to 100 days from calibration to shot, as the calibration says"
    )
    assert finding(result, "calibration matches").weight is Weight.FINE
    assert result.verdict is Verdict.ACCEPT


def test_without_a_calibration_there_is_nothing_to_match(good: ShotResult) -> None:
    assert not has(good, "calibration matches")


@pytest.mark.parametrize(
    ("fired", "weight", "says"),
    [
        ("2031-02-02", Weight.NOTE, "1 days before the calibration spring"),
        ("2031-05-14", Weight.FINE, "100 days after"),
        ("2031-05-15", Weight.NOTE, "101 days after"),
        ("", Weight.NOTE, "no date in the shot sheet"),
    ],
)
def test_days_outside_a_calibration(faces: FaceStrains, fired: str, weight: Weight, says: str) -> None:
    lab = rig()
    result = shot(faces, lab, calibration(lab), date=fired)
    said = finding(result, "calibration date")
    assert said.weight is weight
    assert says in said.measured
    assert result.verdict is Verdict.ACCEPT  # a date alone makes no number wrong


def test_a_lab_may_set_fewer_days_but_not_more(faces: FaceStrains) -> None:
    lab = rig()
    calibrated = lab.calibrated(calibration(lab))
    few = run(faces, calibrated, settings=DEFAULT.replaced(limits=Limits(calibration_days=13)))
    assert finding(few, "calibration date").weight is Weight.NOTE
    many = run(
        faces,
        calibrated,
        good_sheet(date="2031-06-30"),
        settings=DEFAULT.replaced(limits=Limits(calibration_days=999)),
    )
    assert finding(many, "calibration date").weight is Weight.NOTE


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        (
            {"incident_gauge": gauge("A", 1.0, gain=Q(150.0))},
            "incident_gauge gain 150, at the calibration 200",
        ),
        (
            {"transmitted_gauge": gauge("B", 0.6, gauge_factor=Q(2.2))},
            "transmitted_gauge gauge_factor 2.2, at the calibration 2.1",
        ),
        ({"incident_bar": steel_bar(length_m=Q(2.1))}, "incident_bar length_m 2.1, at the calibration 2"),
        ({"name": "another"}, "rig name another, at the calibration closed form"),
    ],
)
def test_a_rig_that_changed_since_is_rejected(
    faces: FaceStrains, changes: dict[str, object], says: str
) -> None:
    measured = calibration(rig())
    result = shot(faces, rig(**changes), measured)
    said = finding(result, "calibration matches")
    assert said.weight is Weight.REJECT
    assert says in said.measured
    assert "Calibrate anew" in said.action
    assert result.verdict is Verdict.REJECT


def test_a_station_that_is_gone_is_a_note(faces: FaceStrains) -> None:
    lab = rig()
    by = calibration(lab)
    by = dataclasses.replace(by, gauges={**by.gauges, "incident_gauge_2": GaugeCalibration()})
    said = finding(shot(faces, lab, by), "calibration matches")
    assert said.weight is Weight.NOTE
    assert "incident_gauge_2" in said.measured


@pytest.mark.parametrize("dispersion", list(Dispersion))
def test_the_budget_takes_the_covariance_of_the_calibration(
    faces: FaceStrains, dispersion: Dispersion
) -> None:
    # Stress by one wave is inverse to the transmitted factor: its relative u is that of the calibration, 0.004/2.1.
    lab = rig(
        incident_gauge=gauge("A", 1.0, gauge_factor=Q(2.1, 0.03)),
        transmitted_gauge=gauge("B", 0.6, gauge_factor=Q(2.1, 0.03)),
    )
    record = record_of(faces, lab, noise_v=0.002)
    settings = DEFAULT.replaced(dispersion=dispersion)
    stated = reduce(record, lab, good_sheet(), settings)
    by = calibration(lab)
    calibrated = reduce(record, lab.calibrated(by), good_sheet(), settings)
    at = sum(stated.response.loading) // 2
    assert calibrated.budget.u["stress_1w"][at] < 0.6 * stated.budget.u["stress_1w"][at]
    alone = reduce(record, lab.calibrated(dataclasses.replace(by, correlations=())), good_sheet(), settings)
    # Factors that err together agree about equilibrium.
    assert calibrated.budget.u_force_difference[at] < alone.budget.u_force_difference[at]
    lines = {line.source for line in calibrated.budget.contributions}
    assert {"incident bar: wave speed", "transmitted bar: wave speed", "correlations"} <= lines
    assert not any(line.assumed for line in calibrated.budget.contributions if "gain" in line.source)


def test_what_two_bars_of_one_stock_share_stays_shared(faces: FaceStrains) -> None:
    # Told apart by their measured speeds, both still have one density: an error of it scales both forces alike and
    # leaves R as it is. With two independent densities of u = 2 % R would be uncertain by 2.8 % from them alone.
    bar = steel_bar(density_kg_m3=Q(8000.0, 160.0))
    lab = rig(incident_bar=bar, transmitted_bar=bar)
    by = calibration(lab)
    result = shot(faces, lab, by)
    at = sum(result.response.loading) // 2
    assert result.budget.u_force_difference[at] < 0.02
    two = dataclasses.replace(
        lab.calibrated(by),
        correlations=tuple(one for one in lab.calibrated(by).correlations if one.coefficient < 1),
    )
    apart = run(faces, two)
    assert apart.budget.u_force_difference[at] > 0.028
