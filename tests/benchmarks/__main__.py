"""Ratios of speed, each measured within one run: ``python -m tests.benchmarks [NAME ...]``.

warm      reduce() of 2 x 100,000 samples over the FFTs it cannot avoid
process   `shpb reduce` of a 100,000-row text record with HDF5 and no figure over the lab's own script
figure    the same with a figure over the same script with a four-panel figure
workers   many shots on one worker over two workers
reader    read_record of 1,000,000 x 3 rows over a bare numpy.loadtxt, time and memory

Times swing by two on a busy machine; the ratios of medians hold. Nothing here asserts a time.
"""

from __future__ import annotations

import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

from shpb.record.read import read_record
from shpb.record.record import Record
from shpb.reduction import reduce
from shpb.wave.propagation import LowPass, fast_length
from tests.synthetic import FaceStrains, copper, record_of, rig, sheet, uniform_plastic_shot

RIG = """
[rig]
name = "benchmark"
[incident_bar]
material = "steel"
diameter_mm = 20.0
length_m = 2.0
density_kg_m3 = 8000.0
wave_speed_m_s = 5000.0
poisson_ratio = 0.29
[transmitted_bar]
material = "steel"
diameter_mm = 20.0
length_m = 2.0
density_kg_m3 = 8000.0
wave_speed_m_s = 5000.0
poisson_ratio = 0.29
[incident_gauge]
channel = "incident_V"
to_specimen_m = 1.0
gauge_factor = 2.1
arrangement = "half-opposite"
excitation_V = 5.0
gain = 200.0
voltage_under_compression = "negative"
[transmitted_gauge]
channel = "transmitted_V"
to_specimen_m = 0.6
gauge_factor = 2.1
arrangement = "half-opposite"
excitation_V = 5.0
gain = 200.0
voltage_under_compression = "negative"
"""

SHEET = """
[shot]
id = "{id}"
kind = "compression"
record = "{record}"
rig = "rig.toml"
[specimen]
material = "copper-like"
diameter_mm = 10.0
length_mm = 5.0
young_modulus_GPa = 120.0
density_kg_m3 = 8900.0
"""


def shot(samples: int, interval_s: float, seed: int = 1) -> Record:
    """A shot of the closed-form specimen at any sampling rate."""
    coarse, _ = uniform_plastic_shot(rig(), copper(), interval_s=1e-6)
    time_s = np.arange(-40e-6, 219e-6, interval_s)
    fine = FaceStrains(
        time_s,
        *(
            np.interp(time_s, coarse.time_s, x)
            for x in (coarse.incident, coarse.reflected, coarse.transmitted)
        ),
    )
    before = 350e-6
    return record_of(
        fine, rig(), noise_v=0.004, seed=seed, before_s=before, after_s=samples * interval_s - before
    )


def write_text(path: Path, record: Record) -> None:
    table = np.column_stack([record.time_s, *record.voltage_v])
    np.savetxt(
        path,
        table,
        delimiter=",",
        fmt=["%.9e", "%.6e", "%.6e"],
        header="time_s,incident_V,transmitted_V",
        comments="",
    )


def median_of(function: Callable[[], object], runs: int) -> float:
    times = []
    for _ in range(runs):
        started = time.perf_counter()
        function()
        times.append(time.perf_counter() - started)
    return statistics.median(times)


def paired(a: Callable[[], object], b: Callable[[], object], runs: int) -> tuple[float, float]:
    """Medians of two functions run in turn."""
    times: tuple[list[float], list[float]] = ([], [])
    for _ in range(runs):
        for function, kept in zip((a, b), times, strict=True):
            started = time.perf_counter()
            function()
            kept.append(time.perf_counter() - started)
    return statistics.median(times[0]), statistics.median(times[1])


def run(*command: str) -> None:
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    if done.returncode not in (0, 3):
        raise SystemExit(f"{' '.join(command)}\n{done.stdout}{done.stderr}")


def warm() -> str:
    record = shot(100_000, 1e-8)
    record = Record(
        voltage_v=record.voltage_v, sample_interval_s=record.sample_interval_s, start_s=record.start_s,
        channels=("A", "B"),
    )  # fmt: skip
    result = reduce(record, rig(), sheet())
    low_pass: LowPass = result.faces.low_pass
    lengths = []
    for pulse, distance in zip(result.pulses, (1.0, 1.0, 0.6), strict=True):
        pad = 1.7 * distance / 5000.0 + 2 * low_pass.settling_s
        lengths.append(fast_length(pulse.strain.size + int(pad / record.sample_interval_s)))
    signals = [np.random.default_rng(0).normal(size=n) for n in lengths]

    def transforms() -> None:
        for signal in signals:
            np.fft.irfft(np.fft.rfft(signal), signal.size)

    ours, theirs = paired(lambda: reduce(record, rig(), sheet()), transforms, 15)
    return f"{ours * 1e3:.0f} ms over {theirs * 1e3:.0f} ms = {ours / theirs:.2f} (aim 4)"


def _against_script(figure: bool) -> str:
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        write_text(folder / "record.csv", shot(100_000, 1e-8))
        (folder / "rig.toml").write_text(RIG)
        (folder / "shot.toml").write_text(SHEET.format(id="b-1", record="record.csv"))
        script = [
            sys.executable,
            str(Path(__file__).with_name("lab_script.py")),
            str(folder / "record.csv"),
            str(folder / "o.npz"),
        ]
        ours = [
            sys.executable,
            "-m",
            "shpb",
            "reduce",
            str(folder / "shot.toml"),
            "--figure",
            "png" if figure else "none",
        ]
        if figure:
            script.append(str(folder / "o.png"))
        run(*ours), run(*script)
        mine, theirs = paired(lambda: run(*ours), lambda: run(*script), 7)
    return f"{mine * 1e3:.0f} ms over {theirs * 1e3:.0f} ms = {mine / theirs:.2f} (aim 1.0)"


def process() -> str:
    return _against_script(figure=False)


def figure() -> str:
    return _against_script(figure=True)


def workers(shots: int = 1000) -> str:
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        (folder / "rig.toml").write_text(RIG)
        rows = ["shot_id,kind,record,rig,material,diameter_mm,length_mm,young_modulus_GPa,density_kg_m3"]
        for i in range(shots):
            write_text(folder / f"r{i}.csv", shot(5000, 2e-7, seed=i)) if i < 20 else os.link(
                folder / f"r{i % 20}.csv", folder / f"r{i}.csv"
            )
            rows.append(f"s{i},compression,r{i}.csv,rig.toml,copper-like,10,5,120,8900")
        (folder / "shots.csv").write_text("\n".join(rows) + "\n")
        base = [sys.executable, "-m", "shpb", "reduce", str(folder / "shots.csv"), "--figure", "none"]
        one = median_of(lambda: run(*base, "--workers", "1", "--results", str(folder / "r1")), 1)
        two = median_of(lambda: run(*base, "--workers", "2", "--results", str(folder / "r2")), 1)
    return f"{one:.1f} s on one worker over {two:.1f} s on two = {one / two:.2f} for {shots} shots (aim 1.8)"


# The high-water mark of the process itself (Linux): what a parent held counts in getrusage, not here.
_READ = "{body}\nprint(next(x.split()[1] for x in open('/proc/self/status') if x.startswith('VmHWM')))"


_LONG = """
import numpy as np
table = np.column_stack([2e-7 * np.arange({rows}), np.random.default_rng(4).normal(size=({rows}, 2))])
np.savetxt({path!r}, table, delimiter=",", fmt=["%.7e", "%.6e", "%.6e"], header="time_s,a_V,b_V", comments="")
"""


def reader() -> str:
    rows = 1_000_000
    with tempfile.TemporaryDirectory() as name:
        path = str(Path(name) / "long.csv")
        # In a process of its own: what a parent holds counts in the peak of its children.
        run(sys.executable, "-c", _LONG.format(rows=rows, path=path))
        bodies = {
            "bare": f"import numpy as np\nx = np.loadtxt({path!r}, delimiter=',', skiprows=1)",
            "ours": f"from shpb.record.read import read_record\nx = read_record({path!r})",
            "idle": "import numpy as np\nimport shpb.record.read",
        }

        def peak_kib(which: str) -> int:
            code = _READ.format(body=bodies[which])
            done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
            return int(done.stdout)

        ours, bare = paired(lambda: read_record(path), lambda: np.loadtxt(path, delimiter=",", skiprows=1), 7)
        table = rows * 3 * 8 / 2**20
        memory, plain = ((peak_kib(which) - peak_kib("idle")) / 1024 for which in ("ours", "bare"))
    return (
        f"{ours:.2f} s over {bare:.2f} s = {ours / bare:.2f} (aim 1.3); peak memory {memory:.0f} MiB for a table of "
        f"{table:.0f} MiB = {memory / table:.2f} (aim 2; bare {plain / table:.2f})"
    )


MEASURES = {"warm": warm, "process": process, "figure": figure, "workers": workers, "reader": reader}

if __name__ == "__main__":
    for chosen in sys.argv[1:] or MEASURES:
        print(f"{chosen:8s} {MEASURES[chosen]()}", flush=True)
