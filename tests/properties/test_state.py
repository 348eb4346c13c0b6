"""BinaryState: shapes, read-only arrays, derived quantities, errors."""

from __future__ import annotations

import math
import pickle

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.integrate import solve_ivp

from clockfall.binary.constants import GM_SUN, SPEED_OF_LIGHT, T_SUN
from clockfall.binary.epoch import Epoch
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import DERIVED, FIELDS, BinaryState
from clockfall.errors import OutOfRange, UnknownField
from clockfall.testing.strategies import binaries

ROUNDING = 8 * np.finfo(float).eps  # a handful of roundings, each half an ulp


def test_the_solar_mass_as_a_time() -> None:
    """T_sun is the published 4.925490947641e-6 s (IAU 2015 nominal GM_sun over c^3)."""
    assert pytest.approx(4.925490947641e-6, rel=3e-13, abs=0.0) == T_SUN  # the printed value has 13 digits
    assert GM_SUN / SPEED_OF_LIGHT**3 == T_SUN


def test_a_single_binary_has_scalar_shape() -> None:
    """A scalar in is a scalar out, for fields and derived quantities."""
    state = BinaryState(mass_1=1.4, mass_2=1.3, orbital_period=3e4, eccentricity=0.6, projected_semi_major_axis=2.0)
    assert state.shape == ()
    for name in DERIVED:
        assert np.shape(getattr(state, name)) == ()
        assert isinstance(getattr(state, name), np.float64), name


def test_all_fields_share_one_batch_shape() -> None:
    """Fields broadcast to one shape; the epoch too."""
    epoch = Epoch.from_mjd(np.array([50000.5, 50001.5, 50002.5]))
    state = BinaryState(mass_1=[[1.0], [2.0]], mass_2=1.3, periastron_epoch=epoch)
    assert state.shape == (2, 3)
    assert state.known("mass_2")[0].shape == (2, 3)
    assert state.periastron_epoch is not None
    assert state.periastron_epoch.shape == (2, 3)


def test_arrays_cannot_be_changed_or_unlocked() -> None:
    """What a state holds is a locked copy: neither the array, nor its flag, nor the given array can change it."""
    given_array = np.array([1.0, 2.0])
    state = BinaryState(mass_1=given_array, mass_2=1.0)
    given_array[0] = 9.0
    (m_1,) = state.known("mass_1")
    assert m_1[0] == 1.0
    with pytest.raises(ValueError, match="read-only"):
        m_1[0] = 3.0
    with pytest.raises(ValueError, match="WRITEABLE"):
        m_1.flags.writeable = True
    with pytest.raises(AttributeError):
        state.mass_1 = given_array  # type: ignore[misc]  # the fault under test


def test_pickling_keeps_everything_locked() -> None:
    """A state that went through pickle has the same values, and is as locked as before."""
    state = BinaryState(mass_1=[1.4, 1.5], mass_2=1.3, periastron_epoch=Epoch.from_mjd(np.array(55555.25)))
    copy = pickle.loads(pickle.dumps(state))
    assert copy.shape == state.shape
    assert {name for name, _ in copy.items()} == {name for name, _ in state.items()}
    assert np.array_equal(copy.mass_1, np.array([1.4, 1.5]))
    with pytest.raises(ValueError, match="read-only"):
        copy.mass_1[0] = 3.0


@pytest.mark.parametrize(
    ("fields", "message"),
    [
        ({"mass_1": -1.0}, r"mass_1: expected 0 < mass_1 \[Msun\], found -1.0"),
        ({"mass_1": [1.0, 0.0]}, r"found 0.0 at index \(1,\)"),
        ({"eccentricity": 1.0}, r"eccentricity: expected 0 <= eccentricity < 1, found 1.0"),
        ({"eccentricity": math.nan}, "found nan"),
        ({"orbital_period": math.inf}, "found inf"),
        ({"mass_1": "heavy"}, "mass_1: expected numbers, found 'heavy'"),
        ({"mass_1": [1.0, 2.0], "mass_2": [1.0, 2.0, 3.0]}, r"mass_1 \(2,\), mass_2 \(3,\)"),
        ({"periastron_epoch": 50000.0}, "expected an Epoch"),
        ({"eccentricity": 0.5, "one_minus_eccentricity": 0.4}, "a difference of 0.1"),
    ],
)
def test_what_has_no_meaning_is_refused(fields: dict[str, object], message: str) -> None:
    """A value outside its range is refused with name, range, unit and place."""
    with pytest.raises(OutOfRange, match=message):
        BinaryState(**fields)  # type: ignore[arg-type]  # faults under test


def test_unknown_names_get_a_hint() -> None:
    """A misspelt field gets the nearest name; a field that is not known says so."""
    with pytest.raises(UnknownField, match="did you mean 'orbital_period'"):
        BinaryState(orbital_perod=1.0)
    with pytest.raises(UnknownField, match="distance is not known"):
        BinaryState(mass_1=1.0).known("mass_1", "distance")
    with pytest.raises(UnknownField, match="did you mean 'total_mass'"):
        BinaryState(mass_1=1.0).known("total_mas")


def test_one_minus_e_keeps_what_e_cannot_say() -> None:
    """1 - e of 1e-18 is kept, though no double e tells it from 1; e stays below 1."""
    state = BinaryState(one_minus_eccentricity=1e-18)
    e, rest, product = state.known("eccentricity", "one_minus_eccentricity", "one_minus_e_squared")
    assert rest == 1e-18
    assert e < 1.0
    assert product == pytest.approx(2e-18, rel=ROUNDING, abs=0.0)


def test_replacing_one_of_the_pair_drops_the_other() -> None:
    """A new eccentricity brings its own 1 - e."""
    state = BinaryState(one_minus_eccentricity=0.25).replace(eccentricity=0.5)
    assert state.known("one_minus_eccentricity")[0] == 0.5


@given(binaries(shape=(3,)))
def test_derived_quantities_agree_with_each_other(state: BinaryState) -> None:
    """Kepler's third law, mass functions and the reduced masses hold among the derived quantities."""
    M, n, a, beta, nu, chirp_mass = state.known(
        "total_mass",
        "mean_motion",
        "relative_semi_major_axis",
        "orbital_velocity",
        "symmetric_mass_ratio",
        "chirp_mass",
    )
    m_1, m_2 = state.known("mass_1", "mass_2")
    assert np.allclose(n**2 * a**3, T_SUN * M, rtol=4 * ROUNDING, atol=0)  # a cube and a square of rounded factors
    assert np.allclose(beta, n * a, rtol=2 * ROUNDING, atol=0)
    assert np.all(nu <= 0.25 * (1 + ROUNDING))
    assert np.allclose(chirp_mass, (m_1 * m_2) ** 0.6 / M**0.2, rtol=2 * ROUNDING, atol=0)


@given(binaries(), st.floats(0.05, 1.0))
def test_sine_of_inclination_inverts_the_mass_function(state: BinaryState, sin_i: float) -> None:
    """Projecting a_R (m_2/M) by sin i to x gives sin i back; a_R is smaller than Kepler's by (3 - nu/3) beta^2."""
    a, m_2, M, nu = state.known("relative_semi_major_axis", "mass_2", "total_mass", "symmetric_mass_ratio")
    (beta,) = state.known("orbital_velocity")
    a_R = a / (1.0 + (3.0 - nu / 3.0) * beta**2)
    projected = state.replace(projected_semi_major_axis=a_R * m_2 / M * sin_i)
    assert projected.known("sin_inclination")[0] == pytest.approx(sin_i, rel=4 * ROUNDING, abs=0.0)


@pytest.mark.parametrize("m_2", [0.05, 1.0, 3.0])
def test_mass_function_to_first_post_newtonian_order(m_2: float) -> None:
    """The orbit of the 1PN equations of motion has the axis that the mass function takes from its period.

    The relative acceleration in harmonic coordinates is integrated from periastron to periastron: Damour & Deruelle
    1985, Ann. Inst. H. Poincare A 43, 107 (also Will 1993, Theory and Experiment in Gravitational Physics; both from
    memory). With a_R half the sum of the extreme separations and the period that of the radial motion, sin i = 1 has to
    come back to 2PN, which is beta^4; without the correction it would miss by 3 beta^2.
    """
    M, nu, e, a = 1.0 + m_2, m_2 / (1.0 + m_2) ** 2, 0.3, 4000.0 * T_SUN * (1.0 + m_2)
    G_M = T_SUN * M

    def motion(_: float, y: FloatArray) -> list[float]:
        x, z, v_x, v_z = y
        r = math.hypot(x, z)
        v_2, r_v = v_x**2 + v_z**2, (x * v_x + z * v_z) / r
        along = G_M / r**2 * (-1.0 + (2.0 * (2.0 + nu) * G_M / r - (1.0 + 3.0 * nu) * v_2 + 1.5 * nu * r_v**2))
        drag = G_M / r**2 * 2.0 * (2.0 - nu) * r_v
        return [v_x, v_z, along * x / r + drag * v_x, along * z / r + drag * v_z]

    def turning(_: float, y: FloatArray) -> float:
        return float(y[0] * y[2] + y[1] * y[3])

    r_0 = a * (1.0 - e)
    start = [r_0, 0.0, 0.0, math.sqrt(G_M * (1.0 + e) / r_0)]
    period = 2.0 * math.pi * math.sqrt(a**3 / G_M)
    orbit = solve_ivp(motion, (0.0, 1.2 * period), start, method="DOP853", rtol=1e-13, atol=1e-14 * a, events=turning)
    times, places = orbit.t_events[0], orbit.y_events[0]
    far, back = (k for k in range(times.size) if times[k] > 0.1 * period)
    a_R = 0.5 * (math.hypot(*places[far][:2]) + math.hypot(*places[back][:2]))
    state = BinaryState(
        mass_1=1.0,
        mass_2=m_2,
        orbital_period=times[back],
        eccentricity=e,
        projected_semi_major_axis=a_R * m_2 / M,
    )
    (sin_i,), (beta,) = state.known("sin_inclination"), state.known("orbital_velocity")
    assert abs(sin_i - 1.0) < 40.0 * beta**4
    assert abs(sin_i - 1.0) < 0.01 * beta**2


@given(binaries(shape=(4,)))
def test_a_batch_equals_a_loop(state: BinaryState) -> None:
    """Each element of a batch is what the single binary gives, to a unit in the last place."""
    for name in sorted(DERIVED - {"sin_inclination"}):
        for k in range(4):
            single = state.take(np.array(k))
            (whole,), (one,) = state.known(name), single.known(name)
            assert abs(whole[k] - one) <= 2 * np.spacing(abs(one)), name  # numpy's vector loops may round apart


def test_every_field_is_described() -> None:
    """Every field has a meaning, a group and units; none is described twice."""
    assert set(FIELDS) == {name for name in BinaryState.__annotations__ if name != "shape"}
    assert all(description.meaning and description.group for description in FIELDS.values())
