"""The whole files that mutants are made from, one set for each reader; small, so that thousands can be read."""

from __future__ import annotations

import dataclasses
import io
import tempfile
from collections.abc import Callable
from pathlib import Path

import h5py
import numpy as np
import scipy.io

from tests.record.writing import INTERVAL_S, START_S, rows, truth

TRUE = truth(samples=60)
A, B = TRUE.voltage_v
EXAMPLES = Path(__file__).parents[2] / "examples"


def text() -> list[bytes]:
    """Every dialect of delimited text."""
    from tests.record.test_text_dialects import PREAMBLES

    time_us, volts = TRUE.time_s * 1e6, TRUE.voltage_v
    head = "Time (us),CH1 (V),CH2 (mV)\n"
    seeds = [
        (head + rows(time_us, volts)).encode(),
        rows(TRUE.time_s, volts, end="\r\n").encode(),
        (head.replace(",", ";") + rows(time_us, volts, sep=";", decimal=",")).encode(),
        ("t / \u00b5s;in / V\n" + rows(time_us, volts[:1], sep=";", decimal=",", end="\r\n")).encode(
            "latin-1"
        ),
        (head.replace(",", "\t") + rows(time_us, volts, sep="\t")).encode("utf-8-sig"),
        ("# Time (us)   CH1 (V)\n" + rows(time_us, volts[:1], sep="  ")).encode(),
        ("Time (ns),CH1 (V)\r" + rows(TRUE.time_s * 1e9, volts[:1], end="\r")).encode(),
        (head + rows(time_us, volts, end="\r\n")).encode("utf-16"),
        ("Zeit,x\r\n" + head + rows(time_us, volts, end="\r\n")).encode("utf-16-le"),
        ('"Time (s)","CH1 (V)","CH2 (V)"\n' + _quoted(rows(TRUE.time_s, volts, sep='","'))).encode(),
        (head.replace("\n", ",,\n") + rows(time_us, volts, tail=",,")).encode(),
        b"Time;CH1;CH2\n(ms);(mV);(V)\n\n" + rows(TRUE.time_s * 1e3, volts, sep=";", decimal=",").encode(),
        _codes(),
        _beside(),
    ]
    for preamble in PREAMBLES.values():
        seeds.append((preamble.replace("400", "60") + rows(None, volts)).encode())
    over = rows(time_us, volts).splitlines()
    over[20:24] = [f"{line.rsplit(',', 1)[0]},{mark}" for line, mark in zip(over[20:24], _MARKS, strict=True)]
    seeds.append((head + "\n".join(over) + "\n").encode())
    return seeds


_MARKS = ("\u221e", "-inf", "OVERFLOW", "1.#INF")


def _quoted(body: str) -> str:
    return "".join(f'"{line}"\n' for line in body.splitlines())


def _codes() -> bytes:
    codes = np.rint(TRUE.voltage_v * 1000)
    head = "Record length,60\nSample interval,2e-7,s\nVolts per code,0.001,0.002\nCode zero,0,12\nCH1,CH2\n"
    return (head + rows(None, codes, value_format="{:.0f}".format)).encode()


def _beside() -> bytes:
    beside = ["Record Length,60,", "Sample Interval,2e-07,s", "Trigger Offset,-2e-5,s", "Vertical Units,V,"]
    lines = rows(TRUE.time_s, TRUE.voltage_v).splitlines()
    padded = beside + [",,"] * len(lines)
    return "".join(f"{left},{line},\n" for left, line in zip(padded, lines, strict=False)).encode()


# --- binary records ---------------------------------------------------------------------------------------


def npy() -> list[bytes]:
    table = np.zeros(60, dtype=[("time_us", "f8"), ("in", "f8"), ("out", "f4")])
    table["time_us"], table["in"], table["out"] = 1e6 * TRUE.time_s, A, B
    arrays = (
        np.column_stack([TRUE.time_s, A, B]),
        np.asfortranarray(TRUE.voltage_v),
        TRUE.voltage_v.astype(">f4"),
        table,
    )
    return [_saved(lambda out, array=array: np.save(out, array)) for array in arrays]  # type: ignore[misc]


def npz() -> list[bytes]:
    sets: tuple[dict[str, object], ...] = (
        {"time_s": TRUE.time_s, "in": A, "out": B},
        {"in": A, "out": B, "t": 1e6 * TRUE.time_s, "time_unit": "us"},
        {"V": TRUE.voltage_v, "fs": 5e6, "start": START_S, "channels": np.array(["x", "y"])},
        {"codes": np.rint(1000 * A).astype(np.int16), "dt": INTERVAL_S, "volts_per_code": 1e-3},
    )
    plain = [_saved(lambda out, one=one: np.savez(out, **one)) for one in sets]  # type: ignore[misc]
    return plain + [_saved(lambda out, one=one: np.savez_compressed(out, **one)) for one in sets]  # type: ignore[misc]


def _saved(save: Callable[[io.BytesIO], None]) -> bytes:
    out = io.BytesIO()
    save(out)
    return out.getvalue()


def _h5(write: Callable[[h5py.File], None], **options: object) -> bytes:
    with h5py.File("seed.h5", "w", driver="core", backing_store=False, **options) as file:
        write(file)
        file.flush()
        return bytes(file.id.get_file_image())


def _flat(file: h5py.File) -> None:
    file["time"] = 1e6 * TRUE.time_s
    file["time"].attrs["units"] = "us"
    file["in"], file["out"] = A, B


def _grouped(file: h5py.File) -> None:
    for name, values in (("in", A), ("out", B)):
        dataset = file.create_dataset(
            f"scope/waveforms/{name}", data=values, compression="gzip", shuffle=True, fletcher32=True
        )
        dataset.attrs.update({"unit": "V", "dt": INTERVAL_S, "label": np.bytes_("in the middle")})
    file["scope"].attrs["trigger_offset"] = START_S


def _scalars(file: h5py.File) -> None:
    file["data/V"] = TRUE.voltage_v
    file["data"].attrs["channel_names"] = ["in", "out"]
    file["meta/sample_rate"] = "5 MS/s"
    file["data/t0"] = START_S


def _compound(file: h5py.File) -> None:
    table = np.zeros(60, dtype=[("time_s", "f8"), ("in", "f8"), ("out", "f4")])
    table["time_s"], table["in"], table["out"] = TRUE.time_s, A, B
    file["table"] = table


def hdf5() -> list[bytes]:
    layouts = (_flat, _grouped, _scalars, _compound)
    return [_h5(one) for one in layouts] + [_h5(one, libver="latest") for one in layouts]


def matlab_73() -> list[bytes]:
    def variables(file: h5py.File) -> None:
        file["V"] = TRUE.voltage_v
        file["Fs"], file["t0"] = np.array([[5e6]]), np.array([[START_S]])
        file["V"].attrs["MATLAB_class"] = np.bytes_("double")
        file["comment"] = np.frombuffer("shot".encode("utf-16-le"), dtype=np.uint16)[:, None]
        file["comment"].attrs["MATLAB_class"] = np.bytes_("char")
        file["#refs#/a"] = np.arange(100.0)

    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, "a.mat")
        with h5py.File(path, "w", userblock_size=512) as file:
            variables(file)
        content = bytearray(path.read_bytes())
    content[:128] = b"MATLAB 7.3 MAT-file, Platform: none".ljust(124) + b"\x00\x02IM"
    return [bytes(content)]


def matlab_5() -> list[bytes]:
    sets: tuple[dict[str, object], ...] = (
        {"t": 1e6 * TRUE.time_s, "time_unit": "us", "in": A, "out": B},
        {"shot": {"scope": {"in": A, "out": B, "dt": INTERVAL_S, "t0": START_S}, "operator": "none"}},
        {
            "data": np.column_stack([TRUE.time_s, A, B]),
            "names": np.array(["time_s", "in", "out"], dtype=object),
        },
    )
    return [
        _saved(lambda out, one=one, packed=packed: scipy.io.savemat(out, one, do_compression=packed))  # type: ignore[misc]
        for one in sets
        for packed in (False, False, True)  # a damaged stream of zlib stops at its check sum: fewer of them
    ]


def tdms() -> list[bytes]:
    import nptdms

    seeds = []
    properties = {"wf_increment": INTERVAL_S, "wf_start_offset": START_S, "unit_string": "V"}
    for segments in (1, 3):
        out = io.BytesIO()
        with nptdms.TdmsWriter(out) as writer:
            for part in np.array_split(TRUE.voltage_v, segments, axis=1):
                channels = [
                    nptdms.ChannelObject("scope", name, np.ascontiguousarray(row), properties)
                    for name, row in zip(("I", "T"), part, strict=True)
                ]
                writer.write_segment(channels)
        seeds.append(out.getvalue())
    return seeds


# --- files that people write --------------------------------------------------------------------------------


def rig() -> list[bytes]:
    from tests.rig.conftest import RIG

    files = sorted(Path(__file__).parents[2].glob("calibration/*.toml"))
    return [RIG.encode(), *(path.read_bytes() for path in files)]


def sheet() -> list[bytes]:
    from tests.rig.conftest import SHEET

    names = ("W-02", "W-05", "W-08")
    return [SHEET.encode(), *((EXAMPLES / "records" / f"{name}.toml").read_bytes() for name in names)]


def shot_list() -> list[bytes]:
    whole = (EXAMPLES / "shot_list.csv").read_bytes()
    few = b"\n".join(whole.splitlines()[:6]) + b"\n"
    return [whole, few, few.replace(b",", b";"), few.decode().replace(",", "\t").encode("utf-16")]


def session() -> list[bytes]:
    from tests.calibrate.test_session_file import SESSION

    return [SESSION.encode()]


def calibration() -> list[bytes]:
    from shpb.rig.calibration_text import calibration_text
    from shpb.rig.rig_file import rig_from_text
    from tests.rig.conftest import RIG
    from tests.rig.test_calibration_file import calibration_of

    return [calibration_text(calibration_of(rig_from_text(RIG, "rig.toml"))).encode()]


def quasistatic() -> list[bytes]:
    seeds = []
    for name in ("W_20C_1e-3", "H_400C_1e-1"):
        lines = (EXAMPLES / "quasistatic" / f"{name}.csv").read_bytes().splitlines()
        thinned = lines[:7] + lines[7::12]
        seeds.append(b"\n".join(thinned) + b"\n")
    return [*seeds, seeds[0].replace(b",", b";").replace(b".", b",")]


def journal() -> list[bytes]:
    """The journal of a watch after three records."""
    from shpb.watch.journal import FILE_NAME, Came, Entry, Journal, Seen

    with tempfile.TemporaryDirectory() as folder:
        kept = Journal(
            Path(folder, FILE_NAME), answers={"material": "copper", "diameter_mm": "8"}, processes=[4711]
        )
        for number, came in enumerate((Came.STORED, Came.UNUSABLE, Came.SAME)):
            seen = Seen(name=f"S-{number}.csv", size=1000, mtime_ns=1_800_000_000, sha256=f"{number}a" * 32)
            kept.put(Entry(files=(seen,), came=came, shot_id=f"S-{number}", verdict="accept", result="S.h5"))
        kept.save()
        return [kept.path.read_bytes()]


# --- results --------------------------------------------------------------------------------------------------


def stored_shot() -> list[bytes]:
    """A shot as ``reduce`` stores it, of a coarse record."""
    from shpb.record.record import Source
    from shpb.reduction import reduce
    from shpb.store.shot_file import save_shot
    from tests.synthetic import copper, record_of, sheet, uniform_plastic_shot
    from tests.synthetic import rig as a_rig

    faces, _ = uniform_plastic_shot(a_rig(), copper(), interval_s=1e-6)
    source = Source(name="b.csv", sha256="ab" * 32, size_bytes=10, reader="text")
    record = dataclasses.replace(record_of(faces, a_rig(), noise_v=0.002), sources=(source,))
    with tempfile.TemporaryDirectory() as folder:
        path = save_shot(reduce(record, a_rig(), sheet(copper())), Path(folder, "a.h5"))
        return [path.read_bytes()]


def stored_merge() -> list[bytes]:
    """What ``merge`` stores of one invented material, fitted to one law."""
    from shpb.merge.campaign import merge_campaign
    from shpb.merge.settings import MergeSettings
    from shpb.store.merge_file import save_merge
    from tests.merge.test_campaign import SHOTS, TESTS

    settings = MergeSettings(models=("ludwik",), strains=(0.05, 0.1))
    with tempfile.TemporaryDirectory() as folder:
        return [save_merge(merge_campaign(SHOTS, TESTS, settings), Path(folder, "m.h5")).read_bytes()]
