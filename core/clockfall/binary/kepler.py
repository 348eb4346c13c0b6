"""Kepler's equation and the three anomalies of an ellipse.

With the mean anomaly M, the eccentric anomaly E, the true anomaly v and the eccentricity e, Kepler's equation is
M = E - e sin E. It is used here in the form

    M = (1 - e) E + e (E - sin E),

with E - sin E taken from a polynomial. All terms have one sign, so that no digit is lost near periastron at high
eccentricity, where the usual form subtracts two nearly equal numbers.

Anomalies keep their whole turns: M, E and v of one instant lie in the same interval [(2k - 1) pi, (2k + 1) pi].
All four functions are odd in the anomaly, to the last bit.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from clockfall.binary.markley import E_MINUS_SIN, SIXTH, Eccentricity, polynomial, solve
from clockfall.binary.ranges import ANY, FloatArray, Range, common_shape, real_array

__all__ = ["eccentric_anomaly", "eccentric_anomaly_from_true", "mean_anomaly", "true_anomaly"]

_ECCENTRICITY = Range(at_least=0.0, below=1.0)
_ROUNDED_ECCENTRICITY = Range(at_least=0.0, at_most=1.0)
# Under the lower end the cube of q in the starter would come near the smallest double. Nature stays far above it.
_ONE_MINUS_ECCENTRICITY = Range(at_least=1e-60, at_most=1.0)
# Both forms of the eccentricity are rounded by the caller; a larger gap means that they belong to different orbits.
_DISAGREEMENT = Range(at_least=-1e-12, at_most=1e-12)


@np.errstate(under="ignore")
def eccentric_anomaly(
    mean_anomaly: ArrayLike, eccentricity: ArrayLike, *, one_minus_eccentricity: ArrayLike | None = None
) -> FloatArray:
    """Solve Kepler's equation M = E - e sin E for E.

    The error is at most 2 units in the last place of E for the very doubles given, however close e is to 1 and
    however many turns M has, if |M| >= 1e-300 or M = 0. There is no iteration that could fail to end.

    Parameters
    ----------
    mean_anomaly : array_like, any shape [rad]
        M, finite; whole turns are kept.
    eccentricity : array_like, broadcasts with mean_anomaly [1]
        e, 0 <= e < 1. With `one_minus_eccentricity` e = 1 is allowed too, as the rounding of an e just below 1.
    one_minus_eccentricity : array_like, broadcasts with eccentricity [1], optional
        1 - e, 1e-60 <= 1 - e <= 1, for an e so close to 1 that 1 - e formed from it would lose digits. When given
        it is what counts; it must agree with `eccentricity` to 1e-12.

    Returns
    -------
    ndarray, shape of the arguments broadcast together [rad]
        E, on the same turn as M: |E - M| <= e. A numpy scalar if all arguments are scalars.

    Raises
    ------
    OutOfRange
        A value that is not finite or outside its range, or shapes that do not broadcast together. A ValueError.

    Notes
    -----
    Starter and fifth-order correction: F. L. Markley, Celest. Mech. Dyn. Astr. 63, 101 (1995). Reduction to one turn
    with 2 pi in parts: W. J. Cody and W. Waite, Software Manual for the Elementary Functions (1980).
    """
    M = _angle("mean_anomaly", mean_anomaly)
    form = _eccentricity(eccentricity, one_minus_eccentricity)
    shape = common_shape(anomaly=M.shape, eccentricity=form.values.shape)
    E = solve(np.broadcast_to(M, shape).reshape(-1), form.flattened(shape))
    return E.reshape(shape)[()]


@np.errstate(under="ignore")
def mean_anomaly(
    eccentric_anomaly: ArrayLike, eccentricity: ArrayLike, *, one_minus_eccentricity: ArrayLike | None = None
) -> FloatArray:
    """Return the mean anomaly from the eccentric anomaly, by Kepler's equation.

    Within half a turn of zero the relative error stays at a few roundings even for e close to 1 and small E.

    Parameters
    ----------
    eccentric_anomaly : array_like, any shape [rad]
        E, finite; whole turns are kept.
    eccentricity : array_like, broadcasts with eccentric_anomaly [1]
        e, 0 <= e < 1; see `eccentric_anomaly`.
    one_minus_eccentricity : array_like, broadcasts with eccentricity [1], optional
        1 - e, 1e-60 <= 1 - e <= 1; see `eccentric_anomaly`.

    Returns
    -------
    ndarray, shape of the arguments broadcast together [rad]
        M, on the same turn as E. A numpy scalar if all arguments are scalars.

    Raises
    ------
    OutOfRange
        A value that is not finite or outside its range, or shapes that do not broadcast together. A ValueError.

    Notes
    -----
    Kepler's equation itself, e.g. C. D. Murray and S. F. Dermott, Solar System Dynamics (1999), eq. 2.52 (equation
    number from memory).
    """
    E = _angle("eccentric_anomaly", eccentric_anomaly)
    e, o = _eccentricity(eccentricity, one_minus_eccentricity).pair()
    common_shape(anomaly=E.shape, eccentricity=e.shape)
    near = np.clip(E, -np.pi, np.pi)
    square = near * near
    cubic = polynomial(E_MINUS_SIN, square, np.empty_like(near))
    cubic += SIXTH
    M = near * (o + e * (square * cubic))
    return np.where(near == E, M, E - e * np.sin(E))[()]


@np.errstate(under="ignore")
def true_anomaly(
    eccentric_anomaly: ArrayLike, eccentricity: ArrayLike, *, one_minus_eccentricity: ArrayLike | None = None
) -> FloatArray:
    """Return the true anomaly from the eccentric anomaly, without a jump between turns.

    Parameters
    ----------
    eccentric_anomaly : array_like, any shape [rad]
        E, finite; whole turns are kept.
    eccentricity : array_like, broadcasts with eccentric_anomaly [1]
        e, 0 <= e < 1; see `eccentric_anomaly`.
    one_minus_eccentricity : array_like, broadcasts with eccentricity [1], optional
        1 - e, 1e-60 <= 1 - e <= 1; see `eccentric_anomaly`.

    Returns
    -------
    ndarray, shape of the arguments broadcast together [rad]
        v, on the same turn as E. A numpy scalar if all arguments are scalars.

    Raises
    ------
    OutOfRange
        A value that is not finite or outside its range, or shapes that do not broadcast together. A ValueError.

    Notes
    -----
    v = E + 2 arctan(beta sin E / (1 - beta cos E)), beta = e / (1 + sqrt(1 - e**2)): R. Broucke and P. Cefola,
    Celest. Mech. 7, 388 (1973). Its arctangent never leaves (-pi/2, pi/2), hence no jump; the denominator is written
    as (1 - beta) + 2 beta sin(E/2)**2, which has no difference in it.
    """
    E = _angle("eccentric_anomaly", eccentric_anomaly)
    e, o = _eccentricity(eccentricity, one_minus_eccentricity).pair()
    common_shape(anomaly=E.shape, eccentricity=e.shape)
    beta, one_minus_beta = _beta(e, o)
    s, c = np.sin(0.5 * E), np.cos(0.5 * E)
    return (E + 2.0 * np.arctan2(2.0 * beta * s * c, one_minus_beta + 2.0 * beta * s * s))[()]


@np.errstate(under="ignore")
def eccentric_anomaly_from_true(
    true_anomaly: ArrayLike, eccentricity: ArrayLike, *, one_minus_eccentricity: ArrayLike | None = None
) -> FloatArray:
    """Return the eccentric anomaly from the true anomaly, without a jump between turns.

    Parameters
    ----------
    true_anomaly : array_like, any shape [rad]
        v, finite; whole turns are kept.
    eccentricity : array_like, broadcasts with true_anomaly [1]
        e, 0 <= e < 1; see `eccentric_anomaly`.
    one_minus_eccentricity : array_like, broadcasts with eccentricity [1], optional
        1 - e, 1e-60 <= 1 - e <= 1; see `eccentric_anomaly`.

    Returns
    -------
    ndarray, shape of the arguments broadcast together [rad]
        E, on the same turn as v. A numpy scalar if all arguments are scalars.

    Raises
    ------
    OutOfRange
        A value that is not finite or outside its range, or shapes that do not broadcast together. A ValueError.

    Notes
    -----
    Within half a turn of zero tan(E/2) = sqrt((1 - e) / (1 + e)) tan(v/2), which keeps the relative accuracy of a
    small E; elsewhere E = v - 2 arctan(beta sin v / (1 + beta cos v)), see `true_anomaly` for the source.
    """
    v = _angle("true_anomaly", true_anomaly)
    e, o = _eccentricity(eccentricity, one_minus_eccentricity).pair()
    common_shape(anomaly=v.shape, eccentricity=e.shape)
    beta, one_minus_beta = _beta(e, o)
    s, c = np.sin(0.5 * v), np.cos(0.5 * v)
    first_turn = 2.0 * np.arctan2(np.sqrt(o) * s, np.sqrt(1.0 + e) * c)
    any_turn = v - 2.0 * np.arctan2(2.0 * beta * s * c, one_minus_beta + 2.0 * beta * c * c)
    return np.where(np.abs(v) <= np.pi, first_turn, any_turn)[()]


def _angle(what: str, values: ArrayLike) -> FloatArray:
    array = real_array(what, values)
    ANY.check(what, array, "rad")
    return array


def _eccentricity(eccentricity: ArrayLike, one_minus: ArrayLike | None) -> Eccentricity:
    """Check the eccentricity and keep the form of it that counts."""
    e = real_array("eccentricity", eccentricity)
    if one_minus is None:
        _ECCENTRICITY.check("eccentricity", e)
        return Eccentricity(e, complement=False)
    o = real_array("one_minus_eccentricity", one_minus)
    _ROUNDED_ECCENTRICITY.check("eccentricity", e)
    _ONE_MINUS_ECCENTRICITY.check("one_minus_eccentricity", o)
    o = np.broadcast_to(o, common_shape(eccentricity=e.shape, one_minus_eccentricity=o.shape))
    _DISAGREEMENT.check("eccentricity + one_minus_eccentricity - 1", np.asarray(e - (1.0 - o)))
    return Eccentricity(o, complement=True)


def _beta(e: FloatArray, o: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Return beta = e / (1 + sqrt(1 - e**2)) and 1 - beta, neither by a difference of near numbers."""
    root = np.sqrt(o * (1.0 + e))
    return e / (1.0 + root), (o + root) / (1.0 + root)
