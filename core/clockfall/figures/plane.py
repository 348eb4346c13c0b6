"""What each measured parameter says of the two masses, computed on a grid of them: what `masses_plane` draws."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

import numpy as np

from clockfall.analysis.outcome import Drawn
from clockfall.analysis.study import Prediction, Study, predicted_at
from clockfall.binary.ranges import FloatArray
from clockfall.effects.host import Host
from clockfall.errors import BadInput
from clockfall.files.shown import Shown
from clockfall.files.units import factor

POINTS: Final = 241
"""Of a grid, each way."""


@dataclass(frozen=True, slots=True)
class Curve:
    """What one measured parameter says of the masses.

    Attributes
    ----------
    name, label : str
        Of the parameter, and for the legend.
    predicted : array, shape (n, k)
        On the grid, m_1 along the first axis; NaN where the prediction has no meaning.
    value, plus, minus : float
        The measurement and its 68.3 % interval [value - minus, value + plus], in the unit of `predicted`.
    """

    name: str
    label: str
    predicted: FloatArray
    value: float
    plus: float
    minus: float


@dataclass(frozen=True, slots=True)
class Plane:
    """A grid of masses, and the curves on it.

    Attributes
    ----------
    mass_1, mass_2 : array, shape (n,) and (k,) [Msun]
        Rising.
    curves : tuple of Curve
        Each with `predicted` of shape (n, k).
    sin_inclination : array, shape (n, k), or None
        By the mass function; above 1 there is no orbit. None where it is not known.
    """

    mass_1: FloatArray
    mass_2: FloatArray
    curves: tuple[Curve, ...]
    sin_inclination: FloatArray | None = None

    def __post_init__(self) -> None:
        shape = (self.mass_1.size, self.mass_2.size)
        for axis in (self.mass_1, self.mass_2):
            if axis.ndim != 1 or axis.size < 2 or not np.all(np.diff(axis) > 0.0):
                raise BadInput("a plane of masses: expected at least two rising masses along each axis [Msun]")
        for curve in self.curves:
            if curve.predicted.shape != shape:
                raise BadInput(f"{curve.name}: expected an array of shape {shape}, found {curve.predicted.shape}")
        if self.sin_inclination is not None and self.sin_inclination.shape != shape:
            raise BadInput(f"sin_inclination: expected an array of shape {shape}, found {self.sin_inclination.shape}")


def whole_axis(*masses: float) -> FloatArray:
    """Return masses [Msun] from near zero to twice the largest of `masses`."""
    return np.linspace(0.01, 2.0, POINTS) * max(masses)


def close_axis(mass: Drawn, sigmas: float = 4.0) -> FloatArray:
    """Return masses [Msun] within some sigmas of a drawn one; within a hundredth of it where it has no spread."""
    half = sigmas * (mass.uncertainty or 0.0025 * mass.central)
    return np.linspace(max(mass.central - half, 1e-3 * mass.central), mass.central + half, POINTS)


def plane(of: Study, host: Host, mass_1: FloatArray, mass_2: FloatArray) -> Plane:
    """Compute what every measured parameter that an effect predicts says of the masses.

    The theory is that of the active effects, whoever wrote them, with every other input at its median. An apparent
    part is taken off the measurement, with its uncertainty.

    Parameters
    ----------
    of : Study
        Of the system.
    host : Host
        That of the study.
    mass_1, mass_2 : array, shape (n,) and (k,) [Msun]
        The grid's axes.
    """
    central = of.sample.central()
    state = central.state.replace(mass_1=mass_1[:, None, None], mass_2=np.asarray(mass_2)[None, :, None])
    found = predicted_at(host, central, of.choices, state)
    names = [name for name in of.sample.measured if name in found and name in of.predicted]
    curves = [_curve(of, found[name], _on_grid(found[name].intrinsic, mass_1, mass_2)) for name in names]
    sine = state.sin_inclination
    return Plane(
        mass_1,
        mass_2,
        tuple(curve for curve in curves if _depends_on_mass(curve)),
        None if sine is None else _on_grid(sine, mass_1, mass_2),
    )


def _on_grid(values: FloatArray, mass_1: FloatArray, mass_2: FloatArray) -> FloatArray:
    """Return what may be the same for all masses on the whole grid, shape (n, k)."""
    return np.broadcast_to(values, (mass_1.size, mass_2.size, 1))[..., 0]


def _depends_on_mass(curve: Curve) -> bool:
    finite = curve.predicted[np.isfinite(curve.predicted)]
    return bool(finite.size and np.ptp(finite) > 0.0)


def _curve(of: Study, on_grid: Prediction, values: FloatArray) -> Curve:
    """Return the curve of one parameter, in the unit in which people read it."""
    name, unit = on_grid.name, on_grid.shown_in
    scale = factor(on_grid.unit, unit)
    cleaned = of.sample.measured[name] - of.predicted[name].apparent
    number = Shown.of(Drawn.from_batch(cleaned, of.sample.possible), scale)
    return Curve(
        name, f"{_words(on_grid)} {number.text(unit)}", values * scale, number.value, number.plus, number.minus
    )


def _words(prediction: Prediction) -> str:
    """Return a parameter's name as words, with the capitals (Einstein, Shapiro) of its meaning."""
    spelt = {word.lower(): word for word in prediction.meaning.split()}
    return " ".join(spelt.get(word, word) for word in prediction.name.split("_"))
