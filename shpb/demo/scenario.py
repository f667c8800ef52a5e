"""The demo campaign's shots: an invented laboratory, two invented alloys, and what goes wrong there."""

from __future__ import annotations

from dataclasses import dataclass, replace
from enum import StrEnum
from functools import cache
from importlib import resources

from shpb.demo.materials import HEXALUNE, WRENMOOR, Alloy
from shpb.errors import InputError
from shpb.forward.shot import ShotPlan
from shpb.forward.striker import Shaper
from shpb.quantity import Quantity
from shpb.rig.bar import Striker
from shpb.rig.rig import Rig
from shpb.rig.rig_file import rig_from_text

LABORATORY = "Fennick Hollow impact laboratory (invented)"
BENCHES = ("bench_1", "bench_2")


class Expected(StrEnum):
    """What a reduction should find about a shot."""

    GOOD = "good"
    NOISY = "noisy"  # windows must still be right; the noise may leave equilibrium open
    NOT_IN_EQUILIBRIUM = "not in equilibrium"
    UNDECIDABLE = "undecidable"  # the floor of R(t) is above its limit
    CLIPPED = "clipped"
    OVERLAPPING = "overlapping"
    SWAPPED = "swapped channels"
    LOOSE_GAUGE = "loose gauge"
    BAR_YIELDED = "bar yielded"
    MISWRITTEN = "specimen size miswritten"
    LATE = "late equilibrium"  # counts only beyond some strain


class Format(StrEnum):
    """How a shot's record is written."""

    COMMA = "comma-separated text with a preamble"
    SEMICOLON = "semicolon-separated text with decimal commas"
    TAB = "tab-separated text in milliseconds and millivolts"
    PER_CHANNEL = "one text file for each channel"
    CODES = "whole-number codes with volts per code in the preamble"
    NPZ = "NumPy archive"
    HDF5 = "HDF5"
    MATLAB = "MATLAB version 5"


@dataclass(frozen=True, slots=True, kw_only=True)
class Fired:
    """What really lay between the bars, and the rig as it really is, where the papers do not quite say so."""

    alloy: Alloy
    diameter_mm: float
    length_mm: float
    temperature_c: float
    rig: Rig


@dataclass(frozen=True, slots=True, kw_only=True)
class DemoShot:
    """One shot of a demo campaign.

    ``special`` and ``expected`` say what it is there for; everything else is what the papers say of it and how
    the scope was set. What was fired is that, too, unless ``fired`` says otherwise.
    """

    shot_id: str
    special: str
    expected: Expected
    alloy: Alloy
    diameter_mm: float
    length_mm: float
    striker_speed_m_s: float
    format: Format
    bench: str = "bench_1"
    temperature_c: float = 20.0
    face_temperature_c: float = 28.0  # of the bars in a hot test: cold bars, brought up just before the shot
    rise_us: float = 20.0
    shaper: Shaper | None = None
    striker_length_mm: float | None = None  # where another striker was in the barrel
    peak_to_noise_db: float = 50.0  # peak of each channel over the rms of its white noise
    interval_us: float = 0.2
    samples: int = 5400
    pretrigger_us: float = 150.0
    clock_starts_at_zero: bool = False  # else time zero of the record is the trigger
    elements: int = 4  # of the forward model
    operator: str = "K.O."
    date: str = "2031-02-17"
    remarks: str = ""
    lubricant: str = "molybdenum disulphide grease"
    fired: Fired | None = None

    @property
    def really(self) -> Fired:
        """What was fired."""
        return self.fired or Fired(
            alloy=self.alloy,
            diameter_mm=self.diameter_mm,
            length_mm=self.length_mm,
            temperature_c=self.temperature_c,
            rig=bench_rig(self.bench),
        )

    @property
    def plan(self) -> ShotPlan:
        """The shot for the forward model."""
        fired = self.really
        striker: Striker | None = None
        if self.striker_length_mm is not None and fired.rig.striker is not None:
            striker = replace(fired.rig.striker, length_m=Quantity(self.striker_length_mm / 1e3))
        return ShotPlan(
            rig=fired.rig,
            specimen=fired.alloy.specimen(fired.diameter_mm / 1e3, fired.length_mm / 1e3),
            striker_speed_m_s=self.striker_speed_m_s,
            temperature_k=fired.temperature_c + 273.15,
            striker=striker,
            rise_s=self.rise_us * 1e-6,
            shaper=self.shaper,
        )


@cache
def bench_text(bench: str) -> str:
    """Text of a rig file of the scenario, from the package's own data."""
    if bench == "bench_1_long":
        return _with_long_striker(bench_text("bench_1"))
    return resources.files("shpb.demo").joinpath("texts", f"{bench}.toml").read_text(encoding="utf-8")


def _with_long_striker(text: str) -> str:
    """The same bench with the striker for long pulses; one set of bars and gauges, and so one name."""
    head = "# Demo rig of an invented laboratory: bench 1, hardened steel bars of 19 mm.\n"
    striker = "length_mm = { value = 300.0, u = 0.05"
    if not (text.startswith(head) and text.count(striker) == 1):
        raise AssertionError("the rig file of bench 1 has changed: see what its striker is called there")
    return head[:-2] + ", long striker.\n" + text[len(head) :].replace(striker, striker.replace("300", "600"))


@cache
def bench_rig(bench: str) -> Rig:
    """Return one of the scenario's rigs, ``bench_1``, ``bench_1_long`` or ``bench_2``."""
    return rig_from_text(bench_text(bench), f"{bench}.toml")


def demo_shots() -> tuple[DemoShot, ...]:
    """Return the shots of the campaign in the order they were fired."""
    return _SHOTS


def demo_shot(shot_id: str) -> DemoShot:
    """Return one shot by its id.

    Raises
    ------
    InputError
        If there is no such shot; the message lists those that there are.
    """
    for shot in _SHOTS:
        if shot.shot_id == shot_id:
            return shot
    raise InputError(
        f"there is no demo shot {shot_id!r}",
        where="demo",
        mend="Ask for one of " + ", ".join(shot.shot_id for shot in _SHOTS),
    )


_SOFT_SHAPER = Shaper(diameter_m=0.010, thickness_m=0.0020, stress_pa=330e6, exponent=0.10)

_SHOTS = (
    DemoShot(
        shot_id="W-01", special="slow end of the range, clean", expected=Expected.GOOD, alloy=WRENMOOR,
        diameter_mm=10.00, length_mm=4.50, striker_speed_m_s=6.35, format=Format.COMMA,
        peak_to_noise_db=54.0,
    ),
    DemoShot(
        shot_id="W-02", special="middle of the range, a table with decimal commas", expected=Expected.GOOD,
        alloy=WRENMOOR, diameter_mm=12.00, length_mm=4.50, striker_speed_m_s=11.6,
        format=Format.SEMICOLON, interval_us=0.4, samples=3000, pretrigger_us=280.0, operator="T.V.",
    ),
    DemoShot(
        shot_id="W-03", special="fast end of the range, sampled at 2 MS/s", expected=Expected.GOOD,
        alloy=WRENMOOR, diameter_mm=9.50, length_mm=3.30, striker_speed_m_s=12.1,
        format=Format.TAB, peak_to_noise_db=48.0, interval_us=0.5, samples=3000, pretrigger_us=560.0,
    ),
    DemoShot(
        shot_id="W-04", special="noisy record, 40 dB", expected=Expected.GOOD, alloy=WRENMOOR,
        diameter_mm=12.00, length_mm=4.50, striker_speed_m_s=11.6, format=Format.NPZ,
        peak_to_noise_db=40.0, operator="T.V.",
    ),
    DemoShot(
        shot_id="W-05", special="very noisy record, 20 dB", expected=Expected.NOISY, alloy=WRENMOOR,
        diameter_mm=12.00, length_mm=4.50, striker_speed_m_s=11.5, format=Format.COMMA,
        peak_to_noise_db=20.0, remarks="Bridge cable near the furnace supply",
    ),
    DemoShot(
        shot_id="W-06", special="hot: 200 °C", expected=Expected.GOOD, alloy=WRENMOOR,
        diameter_mm=12.00, length_mm=4.50, striker_speed_m_s=10.9, format=Format.HDF5,
        temperature_c=200.0, peak_to_noise_db=48.0, lubricant="boron nitride",
    ),
    DemoShot(
        shot_id="W-07", special="small hot specimen: too little force to tell equilibrium from error",
        expected=Expected.UNDECIDABLE, alloy=WRENMOOR, diameter_mm=5.00, length_mm=4.50,
        striker_speed_m_s=7.3, format=Format.PER_CHANNEL, temperature_c=550.0, lubricant="boron nitride",
    ),
    DemoShot(
        shot_id="W-08", special="long specimen, force still rising when it ends: never in equilibrium",
        expected=Expected.NOT_IN_EQUILIBRIUM, alloy=WRENMOOR, diameter_mm=16.00, length_mm=26.00,
        striker_speed_m_s=28.0, format=Format.COMMA, shaper=_SOFT_SHAPER, elements=10, operator="T.V.",
        remarks="Offcut tested at full length; soft disc in front of the striker",
    ),
    DemoShot(
        shot_id="W-09", special="bench 2: other bars, other polarity, four gauges on each",
        expected=Expected.GOOD, alloy=WRENMOOR, diameter_mm=12.00, length_mm=4.50, striker_speed_m_s=11.1,
        format=Format.COMMA, bench="bench_2", interval_us=0.25, samples=4800, pretrigger_us=260.0,
    ),
    DemoShot(
        shot_id="H-01", special="slow end of the range", expected=Expected.GOOD, alloy=HEXALUNE,
        diameter_mm=8.00, length_mm=5.50, striker_speed_m_s=10.6, format=Format.MATLAB,
        peak_to_noise_db=52.0,
    ),
    DemoShot(
        shot_id="H-02", special="middle of the range, whole-number codes without a time column",
        expected=Expected.GOOD, alloy=HEXALUNE, diameter_mm=8.00, length_mm=5.50,
        striker_speed_m_s=15.6, format=Format.CODES, samples=5200, pretrigger_us=120.0, operator="T.V.",
    ),
    DemoShot(
        shot_id="H-03", special="fast end of the range", expected=Expected.GOOD, alloy=HEXALUNE,
        diameter_mm=7.00, length_mm=4.80, striker_speed_m_s=19.4, format=Format.COMMA,
        peak_to_noise_db=46.0, clock_starts_at_zero=True,
    ),
    DemoShot(
        shot_id="H-04", special="hot: 700 °C, near the strength peak", expected=Expected.GOOD, alloy=HEXALUNE,
        diameter_mm=8.00, length_mm=5.50, striker_speed_m_s=16.2, format=Format.HDF5,
        temperature_c=700.0, peak_to_noise_db=48.0, lubricant="boron nitride",
    ),
    DemoShot(
        shot_id="H-05", special="transmitted channel at its rail: specimen too strong for the range",
        expected=Expected.CLIPPED, alloy=HEXALUNE, diameter_mm=12.00, length_mm=5.50,
        striker_speed_m_s=18.5, format=Format.COMMA,
    ),
    DemoShot(
        shot_id="H-06", special="too long a striker: the reflected pulse comes before the incident one ends",
        expected=Expected.OVERLAPPING, alloy=HEXALUNE, diameter_mm=8.00, length_mm=5.50,
        striker_speed_m_s=9.0, striker_length_mm=960.0, format=Format.SEMICOLON, interval_us=0.4,
        samples=3000, pretrigger_us=280.0, operator="T.V.", remarks="The 960 mm striker was in the barrel",
    ),
    DemoShot(
        shot_id="H-07", special="the two cables swapped at the scope", expected=Expected.SWAPPED,
        alloy=HEXALUNE, diameter_mm=8.00, length_mm=5.50, striker_speed_m_s=15.5, format=Format.COMMA,
    ),
    DemoShot(
        shot_id="H-08", special="incident gauge half off: it does not come back to zero and reads low",
        expected=Expected.LOOSE_GAUGE, alloy=HEXALUNE, diameter_mm=8.00, length_mm=5.50,
        striker_speed_m_s=15.7, format=Format.TAB, interval_us=0.25, samples=4400, operator="T.V.",
    ),
    DemoShot(
        shot_id="H-09", special="bench 2 fired beyond the yield strength of its bars",
        expected=Expected.BAR_YIELDED, alloy=HEXALUNE, diameter_mm=10.00, length_mm=8.00,
        striker_speed_m_s=25.0, format=Format.NPZ, bench="bench_2", samples=5600, pretrigger_us=180.0,
    ),
)  # fmt: skip
