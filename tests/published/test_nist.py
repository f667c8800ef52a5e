"""Our least squares against the certified non-linear regression problems of the Statistical Reference Datasets.

NIST/ITL StRD, nonlinear least squares regression, files untouched in ``data/nist-strd`` (public domain); the model is
read from the file itself. Any further file of the set put there is run as well. For each: the model at the certified
point must give the certified residual sum of squares, then both starts must reach the certified parameters to 6
digits and the certified standard deviations to 4.
"""

from __future__ import annotations

import re
from dataclasses import dataclass
from pathlib import Path
from types import CodeType

import numpy as np
import pytest

from shpb.arrays import FloatArray
from shpb.fitting.least_squares import LeastSquaresFit, fit_function

FOLDER = Path(__file__).parent / "data" / "nist-strd"
FILES = sorted(FOLDER.glob("*.dat"))
WORDS = {"exp": np.exp, "log": np.log, "sin": np.sin, "cos": np.cos, "arctan": np.arctan, "pi": np.pi}


@dataclass(frozen=True)
class Certified:
    """One problem as its file states it."""

    response: CodeType  # of y
    expression: CodeType  # of the predictors and the parameters
    columns: FloatArray  # y, then the predictors
    starts: FloatArray  # shape (2, parameters)
    parameters: FloatArray
    deviations: FloatArray
    sum_of_squares: float

    def y(self) -> FloatArray:
        return np.asarray(eval(self.response, {"__builtins__": {}}, {**WORDS, "y": self.columns[0]}))

    def value(self, x: FloatArray, parameters: FloatArray) -> FloatArray:
        names = {f"b{k + 1}": b for k, b in enumerate(parameters)}
        predictors = {"x": x[0], **{f"x{k + 1}": row for k, row in enumerate(x)}}
        return np.asarray(eval(self.expression, {"__builtins__": {}}, {**WORDS, **names, **predictors}))

    def fit(self, start: int) -> LeastSquaresFit:
        return fit_function(self.value, self.columns[1:], self.y(), self.starts[start])


def read(path: Path) -> Certified:
    text = path.read_text(encoding="ascii")
    stated = re.search(r"^\s+((?:y|log\[y\])\s*=.*?)\s*\+\s*e\s*$", text, re.S | re.M)
    assert stated, path.name
    left, right = " ".join(stated[1].split()).replace("[", "(").replace("]", ")").split("=", 1)
    rows = re.findall(r"^\s*b\d+\s*=\s*(\S+)\s+(\S+)\s+(\S+)\s+(\S+)\s*$", text, re.M)
    numbers = np.array(rows, dtype=float)
    total = re.search(r"Residual Sum of Squares:\s*(\S+)", text)
    assert total
    data = text.rsplit("Data:", 1)[1].split("\n", 1)[1]
    return Certified(
        response=compile(left.strip(), path.name, "eval"),
        expression=compile(right.strip(), path.name, "eval"),
        columns=np.array([line.split() for line in data.splitlines() if line.strip()], np.longdouble).T,
        starts=numbers[:, :2].T,
        parameters=numbers[:, 2],
        deviations=numbers[:, 3],
        sum_of_squares=float(total[1]),
    )


def digits(found: FloatArray, certified: FloatArray) -> float:
    """Least number of agreeing digits, -log10 of the relative error."""
    error = np.abs(np.asarray(found) - certified) / np.abs(certified)
    return float(-np.log10(max(float(np.max(error)), 1e-16)))


@pytest.mark.parametrize("path", FILES, ids=lambda p: p.stem)
def test_model_at_the_certified_point(path: Path) -> None:
    problem = read(path)
    residuals = problem.y() - problem.value(problem.columns[1:], problem.parameters)
    # The certified sum has 11 digits and the parameters too; at a minimum their rounding enters squared.
    assert float(residuals @ residuals) == pytest.approx(problem.sum_of_squares, rel=1e-9)


@pytest.mark.parametrize("start", [0, 1], ids=["start 1", "start 2"])
@pytest.mark.parametrize("path", FILES, ids=lambda p: p.stem)
def test_certified_parameters_and_deviations(path: Path, start: int) -> None:
    problem = read(path)
    fit = problem.fit(start)
    assert fit.converged
    assert fit.determined.all()
    assert digits(fit.parameters, problem.parameters) >= 6
    assert digits(fit.u_parameters, problem.deviations) >= 4
    assert fit.sum_of_squares == pytest.approx(problem.sum_of_squares, rel=1e-9)
    assert fit.degrees_of_freedom == problem.columns.shape[1] - problem.parameters.size


def test_the_files_are_there() -> None:
    assert len(FILES) >= 6
