"""A calibration as the text of its file: TOML that people read, with every digit of every number."""

from __future__ import annotations

import re
from collections.abc import Iterator, Mapping

from shpb.quantity import Quantity
from shpb.rig.calibration import BarCalibration, Calibration, GaugeCalibration
from shpb.rig.calibration_keys import AS_STATED, COLUMN_KEYS, FORMAT, FORMAT_VERSION, PROPAGATION
from shpb.rig.propagation_table import COLUMNS, PropagationTable
from shpb.rig.toml_text import toml_comment, toml_value

_HOW = """\
Calibration of one rig, written by shpb calibrate. Keep it as it is: results name it and hold its text.
The rig file puts it in force with [rig] calibration = "{file}".
u is the standard uncertainty. The gauge factor of a station holds its whole chain: with the excitation and
the gain that the rig file stated that day, which stand in its table as_stated, it gives the right strain."""
_WIDE = 100


def calibration_text(calibration: Calibration) -> str:
    """The text of a calibration file; :func:`shpb.rig.calibration_file.calibration_from_text` reads it."""
    return "\n".join("\n".join(block) + "\n" for block in _blocks(calibration))


def _blocks(calibration: Calibration) -> Iterator[list[str]]:
    yield [toml_comment(_HOW.format(file=f"{calibration.name}.toml")).rstrip("\n")]
    yield _head(calibration)
    for name, bar in calibration.bars.items():
        yield from _bar(name, bar)
    for name, gauge in calibration.gauges.items():
        yield from _gauge(name, gauge)
    if calibration.correlations:
        yield [
            "# Correlation coefficients of the values above, by their names in the uncertainty budget.",
            "[correlations]",
            *(
                f"{toml_value(f'{one.first} | {one.second}')} = {float(one.coefficient)!r}"
                for one in calibration.correlations
            ),
        ]
    if calibration.methods:
        yield [
            "# How each was measured.",
            "[methods]",
            *(f"{toml_value(what)} = {toml_value(how)}" for what, how in calibration.methods.items()),
        ]
    for record in calibration.records:
        yield [
            "[[record]]",
            f"shot = {toml_value(record.shot_id)}",
            f"kind = {toml_value(record.kind)}",
            f"file = {toml_value(record.file)}",
            f"sha256 = {toml_value(record.sha256)}",
        ]


def _head(calibration: Calibration) -> list[str]:
    plain_day = re.fullmatch(r"\d{4}-\d\d-\d\d", calibration.date) is not None
    lines = [
        "[calibration]",
        f"format = {toml_value(FORMAT)}",
        f"format_version = {FORMAT_VERSION}",
        *_texts(program_version=calibration.program_version),
        *_texts(name=calibration.name, rig=calibration.rig),
        f"date = {calibration.date if plain_day else toml_value(calibration.date)}",
        f"holds_days = {calibration.holds_days}",
    ]
    temperature = calibration.temperature_k
    if temperature is not None:
        lines.append(_quantity("temperature_K", temperature, f"{temperature - 273.15:.1f} °C", share=False))
    lines += _texts(remarks=calibration.remarks)
    if calibration.findings:
        lines += ["findings = [", *(f"  {toml_value(one)}," for one in calibration.findings), "]"]
    return lines


def _texts(**texts: str) -> list[str]:
    return [f"{key} = {toml_value(text)}" for key, text in texts.items() if text]


def _bar(name: str, bar: BarCalibration) -> Iterator[list[str]]:
    lines = [f"[{name}]"]
    if bar.wave_speed_m_s is not None:
        lines.append(_quantity("wave_speed_m_s", bar.wave_speed_m_s))
    if bar.poisson_ratio is not None:
        lines.append(_quantity("poisson_ratio", bar.poisson_ratio))
    yield lines
    if bar.as_stated:
        yield _as_stated(name, bar.as_stated)
    if bar.propagation is not None:
        yield _propagation(name, bar.propagation)


def _gauge(name: str, gauge: GaugeCalibration) -> Iterator[list[str]]:
    lines = [f"[{name}]"]
    if gauge.gauge_factor is not None:
        stated = gauge.as_stated.get("gauge_factor")
        beside = ""
        if isinstance(stated, float) and stated:
            beside = f"{100 * (gauge.gauge_factor / stated - 1):+.2f} % of the stated {stated:.6g}"
        lines.append(_quantity("gauge_factor", gauge.gauge_factor, beside))
    if gauge.strain_per_volt is not None:
        lines.append(_quantity("strain_per_volt", gauge.strain_per_volt))
    if gauge.to_specimen_m is not None:
        # Metres, not millimetres: they come back bit for bit.
        u = gauge.to_specimen_m.u
        beside = f"{1e3 * gauge.to_specimen_m:.2f} mm" + (f", u {1e3 * u:.2f} mm" if u else "")
        lines.append(_quantity("to_specimen_m", gauge.to_specimen_m, beside, share=False))
    yield lines
    if gauge.as_stated:
        yield _as_stated(name, gauge.as_stated)


def _as_stated(name: str, stated: Mapping[str, str | float]) -> list[str]:
    return [f"[{name}.{AS_STATED}]", *(f"{key} = {toml_value(value)}" for key, value in stated.items())]


def _propagation(name: str, table: PropagationTable) -> list[str]:
    lines = [
        "# Complex propagation coefficient, attenuation + i w / phase speed (Bacon 1998), as measured.",
        f"[{name}.{PROPAGATION}]",
    ]
    for field, key in zip(COLUMNS, COLUMN_KEYS, strict=True):
        lines += [f"{key.name} = [", *_wrapped(getattr(table, field)), "]"]
    return lines


def _wrapped(numbers: tuple[float, ...]) -> Iterator[str]:
    """Numbers of an array on lines that can be read."""
    line = ""
    for number in numbers:
        item = f"{float(number)!r},"
        if line and len(line) + len(item) >= _WIDE:
            yield line
            line = ""
        line = f"{line} {item}" if line else f"  {item}"
    if line:
        yield line


def _quantity(key: str, value: Quantity, beside: str = "", *, share: bool = True) -> str:
    parts: dict[str, object] = {"value": float(value)}
    if value.u is not None:
        parts["u"] = value.u
    if value.origin:
        parts["origin"] = value.origin
    relative = f"u {100 * value.u / abs(value):.2g} %" if share and value.u and value else ""
    said = "; ".join(part for part in (relative, beside) if part)
    text = f"{key} = {toml_value(parts)}"
    return f"{text}  # {said}" if said else text
