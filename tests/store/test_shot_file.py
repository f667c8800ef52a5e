"""HDF5 files of shots: whole, self-describing, read back bit for bit, never over another shot."""

from __future__ import annotations

import csv
import dataclasses
import json
from pathlib import Path

import h5py
import numpy as np
import pytest

from shpb.errors import StoreError
from shpb.limits import Limits
from shpb.quantity import Quantity
from shpb.record.record import Record, Source
from shpb.reduction import ShotResult, reduce
from shpb.rig.rig import RecordHints, Rig
from shpb.rig.sheet import ShotSheet
from shpb.settings import DEFAULT, Alignment, Dispersion, Settings
from shpb.store import layout
from shpb.store.curves_csv import export_csv
from shpb.store.plain import from_plain, to_plain
from shpb.store.shot_file import load, save_shot
from tests.synthetic import copper, record_of, rig, sheet, steel_bar, uniform_plastic_shot


def a_rig() -> Rig:
    bar = steel_bar(diameter_m=Quantity(0.02, 5e-6, "micrometer"))
    return rig(
        incident_bar=bar,
        record=RecordHints(volts_per_code=(0.1, 0.2), channel_names=("A", "B")),
        text='[rig]\nname = "μ"\n',
    )


def a_sheet() -> ShotSheet:
    return sheet(
        copper(length_after_m=Quantity(0.0041, 1e-5)),
        record_files=(Path("a/b.csv"),),
        overrides={"cutoff_hz": 100e3},
        remarks="größer <b>&amp;</b> [/x] $a$\n\x1b[31m",
        text="as written\n",
    )


def a_record() -> Record:
    faces, _ = uniform_plastic_shot(rig(), copper(), interval_s=5e-7)
    record = record_of(faces, rig(), noise_v=0.002)
    source = Source(name="b.csv", sha256="ab" * 32, size_bytes=10, reader="text")
    return dataclasses.replace(record, sources=(source,), remarks=("a remark",))


@pytest.fixture(
    scope="module",
    params=[
        DEFAULT,
        DEFAULT.replaced(
            dispersion=Dispersion.FULL,
            alignment=Alignment.FEET,
            corrections=(),
            limits=Limits(noise=0.1 + 0.2),
        ),
    ],
)
def result(request: pytest.FixtureRequest) -> ShotResult:
    settings: Settings = request.param
    return reduce(a_record(), a_rig(), a_sheet(), settings)


def test_everything_comes_back(result: ShotResult, tmp_path: Path) -> None:
    stored = load(save_shot(result, tmp_path / "s.h5"))
    assert stored.rig == result.rig
    assert stored.sheet == result.sheet
    assert stored.settings == result.settings
    assert stored.findings == result.findings
    assert stored.verdict == result.verdict.value
    # A Quantity compares as a number: what it remembers must come back too.
    diameter = stored.rig.incident_bar.diameter_m
    assert (float(diameter), diameter.u, diameter.origin) == (0.02, 5e-6, "micrometer")
    np.testing.assert_array_equal(stored.record.voltage_v, result.record.voltage_v)
    assert stored.record.sources == result.record.sources
    assert stored.record.remarks == ("a remark",)
    for field in layout.RESPONSE:
        np.testing.assert_array_equal(stored[f"response/{field.name}"], field.of(result), err_msg=field.name)


def test_a_rerun_from_the_file_gives_the_same_bits(result: ShotResult, tmp_path: Path) -> None:
    stored = load(save_shot(result, tmp_path / "s.h5"))
    again = load(save_shot(stored.reduce_again(), tmp_path / "again.h5"))
    assert set(again.arrays) == set(stored.arrays)
    for name, values in stored.arrays.items():
        np.testing.assert_array_equal(again[name], values, err_msg=name)
    assert again.attributes["response"] == stored.attributes["response"]


def test_layout_is_what_any_viewer_needs(result: ShotResult, tmp_path: Path) -> None:
    path = save_shot(result, tmp_path / "s.h5")
    with h5py.File(path) as file:
        assert file.attrs["format"] == "shpb-shot"
        assert file.attrs["format_version"] == 1
        assert file.attrs["shot_id"] == "closed-form-1"
        assert file.attrs["verdict"] in ("accept", "restrict", "reject")
        default = file[file.attrs["default"]]
        assert default.attrs["NX_class"] == "NXdata"
        signal, axis = default[default.attrs["signal"]], default[default.attrs["axes"][0]]
        assert signal.shape == axis.shape
        assert signal.attrs["units"] == "Pa"
        assert "True stress" in signal.attrs["long_name"]
        for name in ("time", "force_in", "force_out", "velocity_in", "velocity_out", "strain_rate_1w", "strain_1w",
                     "stress_1w", "strain_rate_3w", "strain_3w", "stress_3w", "equilibrium_ratio", "true_strain",
                     "true_stress"):  # fmt: skip
            assert "units" in file["response"][name].attrs, name
        assert file["response"].attrs["record_time_of_zero"] == result.faces.record_time_of_zero_s
        assert file["rig/rig_file"][()].decode() == '[rig]\nname = "μ"\n'
        assert list(file["record"].attrs["sha256"]) == ["ab" * 32]
        assert file["record/voltage"].fletcher32
        assert file["pulse/incident"].attrs["window"].tolist() == list(result.pulses.incident.window_s)
        assert isinstance(json.loads(file["trust/findings"][()]), list)
        if result.settings.alignment is Alignment.FEET:
            assert file["wave"].attrs["reflected_shift"] == result.faces.reflected_shift_s != 0
            assert "equilibrium_mean_ratio_untuned" in file["response"].attrs
            untuned = file["response/equilibrium_ratio_untuned"][()]
            assert untuned.shape == file["response/equilibrium_ratio"].shape
            assert not np.array_equal(untuned, file["response/equilibrium_ratio"][()])


def test_the_same_shot_replaces_itself_and_nothing_else(result: ShotResult, tmp_path: Path) -> None:
    path = save_shot(result, tmp_path / "s.h5")
    save_shot(result, path)
    other = dataclasses.replace(result, sheet=dataclasses.replace(result.sheet, shot_id="other"))
    before = path.read_bytes()
    with pytest.raises(StoreError, match="holds shot closed-form-1; shot other is not written over it"):
        save_shot(other, path)
    source = dataclasses.replace(result.record.sources[0], sha256="cd" * 32)
    refired = dataclasses.replace(result, record=dataclasses.replace(result.record, sources=(source,)))
    with pytest.raises(StoreError, match="from another record"):
        save_shot(refired, path)
    assert path.read_bytes() == before
    foreign = tmp_path / "notes.h5"
    foreign.write_text("precious")
    with pytest.raises(StoreError, match="cannot be read as a shot file"):
        save_shot(result, foreign)
    assert foreign.read_text() == "precious"


def test_refusals_of_load(result: ShotResult, tmp_path: Path) -> None:
    with pytest.raises(StoreError, match="no such file"):
        load(tmp_path / "nothing.h5")
    text = tmp_path / "text.h5"
    text.write_text("not hdf5")
    with pytest.raises(StoreError, match="cannot be read as a shot file"):
        load(text)
    foreign = tmp_path / "foreign.h5"
    with h5py.File(foreign, "w") as file:
        file["x"] = 1
    with pytest.raises(StoreError, match="not a shot of this program"):
        load(foreign)
    path = save_shot(result, tmp_path / "s.h5")
    with h5py.File(path, "r+") as file:
        file.attrs["format_version"] = 99
    with pytest.raises(StoreError, match="format version 99; this program reads up to 1"):
        load(path)
    stored = load(save_shot(result, tmp_path / "t.h5"))
    with pytest.raises(StoreError, match="response/stress_3w"):
        stored["response/stress_9w"]


def test_a_full_disk_leaves_the_earlier_result(
    result: ShotResult, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path = save_shot(result, tmp_path / "s.h5")
    before = path.read_bytes()
    for name in ("fsync", "replace"):

        def refuse(*_: object) -> None:
            raise OSError(28, "No space left on device")

        with monkeypatch.context() as patch:
            patch.setattr(f"shpb.whole_file.os.{name}", refuse)
            with pytest.raises(StoreError, match="No space left on device"):
                save_shot(result, path)
        assert path.read_bytes() == before
        assert [p.name for p in tmp_path.iterdir()] == ["s.h5"]


def test_curves_as_csv(result: ShotResult, tmp_path: Path) -> None:
    path = export_csv(result, tmp_path / "s.csv")
    rows = list(csv.DictReader(path.read_text(encoding="utf-8").splitlines()))
    index = result.response.loading[0] + 100
    row = rows[index]
    assert float(row["time_us"]) == pytest.approx(1e6 * result.response.time_s[index], rel=1e-7)
    assert float(row["stress_3w_MPa"]) == pytest.approx(
        1e-6 * result.response.three_wave.stress_pa[index], rel=1e-7
    )
    assert float(row["true_strain"]) == pytest.approx(result.response.curve.true_strain[index], rel=1e-7)
    span = result.response.span
    counted = [i for i, r in enumerate(rows) if r["counts"] == "1"]
    assert span is not None
    assert (counted[0], counted[-1] + 1) == span


def test_plain_form_refuses_what_it_does_not_know() -> None:
    data = to_plain(DEFAULT)
    assert from_plain(Settings, json.loads(json.dumps(data))) == DEFAULT
    with pytest.raises(
        StoreError, match="it holds from_the_future of Settings, which this version does not know"
    ):
        from_plain(Settings, {**data, "from_the_future": 1})


def test_csv_holds_the_temperature_where_it_is_known(tmp_path: Path) -> None:
    faces, _ = uniform_plastic_shot(rig(), copper())
    record = record_of(faces, rig())
    warm = reduce(record, rig(), sheet(copper(heat_capacity_j_kg_k=Quantity(385.0))))
    plain = reduce(record, rig(), sheet())

    def table(result: ShotResult, name: str) -> tuple[list[str], list[str]]:
        lines = export_csv(result, tmp_path / name).read_text().splitlines()
        return lines[0].split(","), lines[-1].split(",")

    names, last = table(warm, "warm.csv")
    assert names[-1] == "temperature_K"
    rise = warm.response.heating_k
    assert rise is not None
    assert float(last[-1]) == pytest.approx(293.15 + rise.max(), abs=1e-3)
    assert "temperature_K" not in table(plain, "plain.csv")[0]
