"""The summary for other programs: strict JSON that says what the result says."""

from __future__ import annotations

import dataclasses
import json
import math

import pytest

from shpb.errors import FileMistakes, InputError, Mistake
from shpb.pulse.front import UnusableShotError
from shpb.reduction import ShotResult
from shpb.trust.budget import ALL_OUTPUTS
from shpb.view.summary import SCHEMA_VERSION, error_json, json_text, record_json, shot_json


def _refuse(constant: str) -> None:
    raise AssertionError(f"{constant} is no JSON")


def test_every_shot_gives_strict_json_that_comes_back_the_same(shots: dict[str, ShotResult]) -> None:
    for result in shots.values():
        content = shot_json(result)
        text = json.dumps(content, allow_nan=False)
        assert json.loads(text, parse_constant=_refuse) == content
        assert json.loads(json_text(content)) == content
        assert json_text(content).isascii()


def test_numbers_are_those_of_the_result(shots: dict[str, ShotResult]) -> None:
    result, content = shots["good"], shot_json(shots["good"])
    assert (content["schema"], content["schema_version"]) == ("shpb shot", SCHEMA_VERSION)
    assert content["verdict"] == "accept"
    assert content["strain_rate"]["mean_per_s"] == result.response.rate.mean_per_s
    assert (content["counts"]["from_true_strain"], content["counts"]["to_true_strain"]) == (
        result.response.strain_span
    )
    assert content["flow"][2]["at_strain"] == 0.1
    assert content["flow"][2]["true_stress_pa"] == result.response.flow[2].stress_pa
    assert content["flow"][2]["strain_kind"] == "true plastic"
    assert content["processing"]["low_pass_cutoff_hz"] == pytest.approx(0.234 * 5000 / 0.01)
    assert content["specimen"]["length_m"] == 6e-3
    assert [f["check"] for f in content["findings"]] == [f.check for f in result.findings]
    assert content["inputs"]["records"][0]["name"] == "K-101"


def test_what_is_not_known_is_null(shots: dict[str, ShotResult]) -> None:
    rejected = shot_json(shots["not in equilibrium"])
    assert rejected["verdict"] == "reject"
    assert rejected["counts"] is None
    assert all(flow["true_stress_pa"] is None for flow in rejected["flow"])
    assert rejected["equilibrium"]["true_strain_at_start"] is None
    assert shot_json(shots["feet"])["equilibrium_without_tuning"]["outcome"] == "reached"
    broken = dataclasses.replace(
        shots["good"], response=dataclasses.replace(shots["good"].response, apparent_slope_pa=math.nan)
    )
    assert shot_json(broken)["apparent_slope_pa"] is None


def test_no_curves_are_in_it(shots: dict[str, ShotResult]) -> None:
    def longest(value: object) -> int:
        if isinstance(value, dict):
            return max(map(longest, value.values()), default=0)
        if isinstance(value, list):
            return max(len(value), *map(longest, value), 0)
        return 0

    assert longest(shot_json(shots["good"])) <= 40  # findings


def test_keys_with_a_dimension_carry_its_unit(shots: dict[str, ShotResult]) -> None:
    units = ("_m", "_m_s", "_k", "_pa", "_j", "_s", "_n_s", "_hz", "_per_s", "_bytes")
    bare = {
        "schema_version", "limit", "mean_ratio", "floor", "true_strain_at_start", "share_within", "nrms",
        "impulse_ratio", "reverberations", "variation", "slope", "from_true_strain", "to_true_strain",
        "at_strain", "indentation_strain", "noise_strain", "low_pass_cutoff_fa_c0", "u_strain_1w", "u_strain_3w",
        "coverage_factor", "u_by_all_sources", "interval", "greatest_strain_off",
        "misfit", "expected_misfit", "scale", "excess_standard_uncertainties",
        *(f"of_{name}" for name in ALL_OUTPUTS),
    }  # fmt: skip

    def numbers(value: object, key: str = "") -> None:
        if isinstance(value, dict):
            for name, item in value.items():
                numbers(item, name)
        elif isinstance(value, list):
            for item in value:
                numbers(item, key)
        elif isinstance(value, float | int) and not isinstance(value, bool):
            assert key.endswith(units) or key in bare, key

    numbers(shot_json(shots["good"]))


def test_a_record_says_what_it_holds(shots: dict[str, ShotResult]) -> None:
    record = shots["good"].record
    content = record_json(record)
    assert json.loads(json_text(content), parse_constant=_refuse) == content
    assert (content["schema"], content["samples"]) == ("shpb record", 3000)
    assert content["sample_interval_s"] == 4e-7
    assert [channel["name"] for channel in content["channels"]] == ["A", "B"]
    assert content["channels"][1]["least_v"] == record.voltage_v[1].min()


def test_an_error_says_what_where_and_the_mend() -> None:
    content = error_json(InputError("it is broken", where="a.csv", mend="Mend it"))
    assert content["schema"] == "shpb error"
    assert content["error"] == {
        "kind": "InputError",
        "message": "a.csv: it is broken. Mend it",
        "what": "it is broken",
        "where": "a.csv",
        "mend": "Mend it",
    }
    assert error_json(UnusableShotError("no pulse", check="dead channel"))["error"]["check"] == "dead channel"
    mistakes = FileMistakes([Mistake("rig.toml", "incident_bar.length_mm", "-3", "1 to 10000")])
    assert error_json(mistakes)["error"]["mistakes"][0]["key"] == "incident_bar.length_mm"
    assert error_json(OSError(28, "no room"))["error"]["kind"] == "OSError"


def test_a_name_that_is_no_text_does_not_break_it() -> None:
    text = json_text(error_json(InputError("bad \udc80 name", where="x")))
    text.encode("ascii")
    assert json.loads(text)["error"]["what"] == "bad \\udc80 name"
