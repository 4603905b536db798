"""The NIST StRD files: models, starting values, certified values and data."""

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

FOLDER = Path(__file__).parent / "data" / "strd"
Floats = NDArray[np.float64]
Model = Callable[[Floats, Floats], Floats]


@dataclass(frozen=True)
class Regression:
    """One set: two starts (P,), certified values, their sd, sum of squares, data."""

    starts: tuple[Floats, Floats]
    certified: Floats
    sd: Floats
    sum_of_squares: float
    y: Floats
    x: Floats


def read_regression(name: str) -> Regression:
    """The file of a set; everything comes from its header and its data lines."""
    lines = (FOLDER / f"{name}.dat").read_text(encoding="ascii").splitlines()
    rows = [
        [float(word) for word in line.split("=")[1].split()]
        for line in lines
        if line.strip().startswith("b") and "=" in line and len(line.split()) == 6
    ]
    table = np.array(rows)
    squares = next(line for line in lines if line.startswith("Residual Sum"))
    data = np.array([[float(w) for w in line.split()] for line in lines[60:] if line])
    return Regression(
        starts=(table[:, 0], table[:, 1]),
        certified=table[:, 2],
        sd=table[:, 3],
        sum_of_squares=float(squares.split(":")[1]),
        y=data[:, 0],
        x=data[:, 1],
    )


def _gauss1(b: Floats, x: Floats) -> Floats:
    first = b[2] * np.exp(-(((x - b[3]) / b[4]) ** 2))
    second = b[5] * np.exp(-(((x - b[6]) / b[7]) ** 2))
    return np.asarray(b[0] * np.exp(-b[1] * x) + first + second)


def _thurber(b: Floats, x: Floats) -> Floats:
    above = b[0] + b[1] * x + b[2] * x**2 + b[3] * x**3
    return np.asarray(above / (1.0 + b[4] * x + b[5] * x**2 + b[6] * x**3))


MODELS: dict[str, Model] = {
    "Misra1a": lambda b, x: b[0] * (1.0 - np.exp(-b[1] * x)),
    "Gauss1": _gauss1,
    "Thurber": _thurber,
    "MGH10": lambda b, x: b[0] * np.exp(b[1] / (x + b[2])),
    "Eckerle4": lambda b, x: b[0] / b[1] * np.exp(-0.5 * ((x - b[2]) / b[1]) ** 2),
    "Rat43": lambda b, x: b[0] * (1.0 + np.exp(b[1] - b[2] * x)) ** (-1.0 / b[3]),
}
