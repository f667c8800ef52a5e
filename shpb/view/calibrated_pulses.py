"""What lines, contacts and free ends of a calibration show besides the sensitivities: in words and as JSON."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from shpb.calibrate.calibration import Calibrated
from shpb.calibrate.sensitivity.line_tests import LineTests
from shpb.view.summary import Json
from shpb.view.text import wrapped


def pulses_text(done: Calibrated, width: int = 80) -> list[str]:
    """A line for each striker line and shunt line, for the contact of the bars and for the free ends; may be empty."""
    said = [*_of_lines(done), *_of_contact(done), *_of_free_ends(done)]
    lines = ["PULSES AND LINES"] if said else []
    for text in said:
        lines += wrapped(text, width, first="  ", rest="    ")
    return lines


def _of_lines(done: Calibrated) -> Iterator[str]:
    for line in done.lines.lines if done.lines is not None else ():
        name, count = line.station.replace("_", " "), len(line.points)
        said = f"striker line of the {name}: {count} shot{'s' if count != 1 else ''}{_straight(line.tests)}"
        if line.momentum is not None:
            said += f"; q by momentum {line.momentum.value:.4f}, u {100 * line.u_momentum:.2f} %"
        yield said
    for check in done.shunts.checks if done.shunts is not None else ():
        name, count = check.station.replace("_", " "), len(check.points)
        worst = max(abs(point.gain_ratio / check.mean.value - 1) for point in check.points)
        yield (
            f"shunts of the {name}: {count}, excitation and gain {100 * (check.mean.value - 1):+.2f} % of what is "
            f"stated, apart by up to {100 * worst:.2f} %{_straight(check.tests)}"
        )


def _straight(tests: LineTests) -> str:
    said = ""
    if tests.intercept is not None and tests.u_intercept is not None:
        said += f"; intercept {1e6 * tests.intercept:+.1f} microstrain, u {1e6 * tests.u_intercept:.1f}"
    if tests.curvature is not None and tests.u_curvature is not None:
        said += f"; curvature {100 * tests.curvature:+.2f} %, u {100 * tests.u_curvature:.2f}"
    return said


def _of_contact(done: Calibrated) -> Iterator[str]:
    if done.compared is None:
        return
    for ratio in done.compared.ratios:
        delays = [1e9 * shot.delay_s for shot in ratio.shots]
        yield (
            f"{ratio.station.replace('_', ' ')} laid on the {ratio.reference.replace('_', ' ')}: {len(ratio.shots)} "
            f"times, apart by {_range(delays, '.0f')} ns and up to "
            f"{100 * max(shot.rms for shot in ratio.shots):.2f} % of the peak (RMS)"
        )
    reflections = done.compared.reflections
    if reflections:
        yield (
            f"contact of the bars sends back {_range([100 * one.share for one in reflections], '+.2f')} % of the "
            f"pulse, expected {100 * reflections[0].expected:+.2f} %"
        )


def _of_free_ends(done: Calibrated) -> Iterator[str]:
    ends = done.compared.free_ends if done.compared is not None else ()
    for station in dict.fromkeys(one.station for one in ends):
        shares = [100 * one.ratio for one in ends if one.station == station]
        yield f"a free end returns {_range(shares, '.2f')} % of the pulse at the {station.replace('_', ' ')}"


def _range(values: Sequence[float], form: str) -> str:
    low, high = format(min(values), form), format(max(values), form)
    return low if low == high else f"{low} to {high}"


def pulses_json(done: Calibrated) -> Json:
    """The same for other programs; ratios are shares, times in seconds."""
    lines = done.lines.lines if done.lines is not None else ()
    checks = done.shunts.checks if done.shunts is not None else ()
    compared = done.compared
    return {
        "striker_lines": [
            {
                "station": line.station,
                "q": line.q,
                "u": line.u_q,
                "q_by_momentum": None if line.momentum is None else line.momentum.value,
                "u_relative_by_momentum": None if line.momentum is None else line.u_momentum,
                **_tests(line.tests),
                "points": [
                    {
                        "shot_id": point.shot_id,
                        "speed_m_s": point.speed_m_s,
                        "expected_strain": point.expected,
                        "stated_strain": point.stated,
                    }
                    for point in line.points
                ],
            }
            for line in lines
        ],
        "shunts": [
            {
                "station": check.station,
                "gain_ratio": check.mean.value,
                **_tests(check.tests),
                "points": [
                    {
                        "shot_id": p.shot_id,
                        "shunt_ohm": p.shunt_ohm,
                        "simulated_strain": p.expected,
                        "stated_strain": p.stated,
                    }
                    for p in check.points
                ],
            }
            for check in checks
        ],
        "contacts": [
            {"shot_id": one.shot_id, "reflected_share": one.share, "u": one.u_share, "expected": one.expected}
            for one in (compared.reflections if compared is not None else ())
        ],
        "free_ends": [
            {"shot_id": one.comparison.shot_id, "station": one.station, "ratio": one.ratio, "u": one.u_ratio}
            for one in (compared.free_ends if compared is not None else ())
        ],
    }


def _tests(tests: LineTests) -> Json:
    names = ("intercept", "u_intercept", "curvature", "u_curvature")
    return {name: getattr(tests, name) for name in names}
