"""A broken effect is named, left out, and stops nobody else."""

from __future__ import annotations

from collections.abc import Callable
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest

from clockfall.binary.epoch import Epoch
from clockfall.binary.orbit import Orbit, SecularMotion
from clockfall.binary.state import BinaryState
from clockfall.effects import (
    Card,
    Caution,
    ClosedFormTrack,
    Delay,
    OwnParameter,
    Parameter,
    Predicted,
    Rate,
    Rates,
    hook,
)
from clockfall.effects.host import EffectError, UnknownEffect
from clockfall.effects.loading import Candidate, installed_candidates, load_host
from clockfall.errors import BadInput

STATE = BinaryState(mass_1=[1.4, 1.5], mass_2=1.3, orbital_period=3e4, eccentricity=0.6, longitude_of_periastron=1.0)


def card(name: str, **changes: Any) -> Card:
    """Return a well-formed card."""
    fields: dict[str, Any] = {
        "name": name,
        "summary": "an effect made for a test",
        "formula": "none",
        "sources": ("invented for this test",),
        "order": "none",
        "valid": "everywhere",
        "needs": ("mass_1",),
        "gives": (Rate("orbital_period"), Parameter(f"parameter_of_{name.replace('-', '_')}", "s", "invented")),
    }
    return Card(**{**fields, **changes})


def candidate(name: str, distribution: str = "someone-elses", **hooks: Callable[..., Any]) -> Candidate:
    """Return an effect on offer with the hooks given; it describes itself unless told otherwise."""
    hooks.setdefault("describe", lambda: card(name))
    plugin = SimpleNamespace(**{hook_name: hook(function) for hook_name, function in hooks.items()})
    return Candidate(name, distribution, "0.1", lambda: plugin)


def good(name: str = "good-effect") -> Candidate:
    """Return an effect that works: one second per second."""
    return candidate(name, secular_rates=lambda state: Rates({"orbital_period": np.ones(state.shape)}))


def summed(*candidates: Candidate, strict: bool = False) -> tuple[dict[str, list[str]], list[str]]:
    """Return who contributed to what, and what was said of the failures."""
    applied = load_host([*candidates, good()], strict=strict).apply(STATE)
    who: dict[str, list[str]] = {}
    for contribution in (*applied.secular_rates(), *applied.predicted_parameters()):
        who.setdefault(contribution.name, []).append(contribution.card.name)
    applied.cautions()
    applied.closed_form_track(np.zeros(1))
    return who, [str(failure) for failure in applied.failures]


def test_an_import_that_raises_is_named() -> None:
    """An effect whose import raises is named with its distribution and the cause; the rest runs."""

    def fail() -> Any:
        raise ImportError("no module named 'moonbeam'")

    who, said = summed(Candidate("broken-effect", "someone-elses", "0.1", fail))
    assert who == {"orbital_period_rate": ["good-effect"]}
    assert said == ["effect 'broken-effect' (someone-elses) failed in import: ImportError: no module named 'moonbeam'"]


def test_an_import_that_exits_is_named() -> None:
    """An effect that calls sys.exit() on import does not end the program."""

    def leave() -> Any:
        raise SystemExit(3)

    _, said = summed(Candidate("broken-effect", "someone-elses", "0.1", leave))
    assert "SystemExit" in said[0]


def raises(state: BinaryState) -> Any:
    """Fail as a hook."""
    raise ZeroDivisionError(f"nothing to divide {state.shape} by")


def writes_in_place(state: BinaryState) -> Rates:
    """Try to change an array of the state."""
    (m_1,) = state.known("mass_1")
    m_1[0] = 5.0
    return Rates({"orbital_period": m_1})


def unlocks_and_writes(state: BinaryState) -> Rates:
    """Try to unlock an array of the state first."""
    (m_1,) = state.known("mass_1")
    m_1.flags.writeable = True
    m_1[0] = 5.0
    return Rates({"orbital_period": m_1})


def swaps_a_field(state: BinaryState) -> Rates:
    """Replace a field behind the state's back."""
    object.__setattr__(state, "mass_1", np.array([7.0, 7.0]))
    return Rates({"orbital_period": np.ones(state.shape)})


BAD_RETURNS: dict[str, tuple[Callable[..., Any], str]] = {
    "raises": (raises, "ZeroDivisionError: nothing to divide"),
    "none": (lambda: None, "returned NoneType, expected Rates"),
    "plain dict": (lambda: {"orbital_period": 1.0}, "returned dict, expected Rates"),
    "wrong contribution": (lambda: Predicted({}), "returned Predicted, expected Rates"),
    "unknown field": (lambda: Rates({"orbital_perod": np.ones(2)}), "'orbital_perod', which its card does not give"),
    "undeclared field": (lambda: Rates({"eccentricity": np.ones(2)}), "'eccentricity', which its card does not give"),
    "scalar for a batch": (
        lambda: Rates({"orbital_period": np.float64(1)}),
        "has shape (), expected the batch's shape (2,)",
    ),
    "wrong shape": (lambda: Rates({"orbital_period": np.ones((2, 1))}), "has shape (2, 1)"),
    "list": (lambda: Rates({"orbital_period": [1.0, 2.0]}), "is list, expected float64"),  # type: ignore[dict-item]  # the fault
    "integers": (lambda: Rates({"orbital_period": np.ones(2, dtype=int)}), "is an array of int64, expected float64"),  # type: ignore[dict-item]  # the fault
    "nan": (lambda: Rates({"orbital_period": np.array([1.0, np.nan])}), "is not finite in 1 of 2"),
    "infinity": (lambda: Rates({"orbital_period": np.array([np.inf, np.inf])}), "is not finite in 2 of 2"),
    "overflow": (lambda state: Rates({"orbital_period": state.mass_1 / np.zeros(2)}), "FloatingPointError"),
    "writes": (writes_in_place, "read-only"),
    "unlocks": (unlocks_and_writes, "WRITEABLE"),
    "swaps": (swaps_a_field, "changed the shared state (mass_1)"),
}


@pytest.mark.parametrize("fault", BAD_RETURNS)
def test_a_bad_rate_is_named_and_left_out(fault: str) -> None:
    """Whatever `secular_rates` does wrong, the effect, the hook and the fault are named, and the rest is summed."""
    function, expected = BAD_RETURNS[fault]
    before = np.array(STATE.mass_1)
    who, said = summed(candidate("broken-effect", secular_rates=function))
    assert who["orbital_period_rate"] == ["good-effect"]
    assert len(said) == 1
    assert said[0].startswith("effect 'broken-effect' (someone-elses) failed in secular_rates: ")
    assert expected in said[0]
    assert np.array_equal(np.asarray(STATE.mass_1), before)


@pytest.mark.parametrize("fault", BAD_RETURNS)
def test_strict_makes_it_fatal(fault: str) -> None:
    """With strict, the first failure is raised, and keeps its cause."""
    function, expected = BAD_RETURNS[fault]
    with pytest.raises(EffectError, match=r"broken-effect.*secular_rates") as caught:
        summed(candidate("broken-effect", secular_rates=function), strict=True)
    assert expected in str(caught.value)
    assert caught.value.__cause__ is not None
    assert (caught.value.effect, caught.value.hook) == ("broken-effect", "secular_rates")


@pytest.mark.parametrize(
    ("hooks", "expected"),
    [
        ({"predicted_parameters": lambda: Predicted({"other": np.ones(2)})}, "'other', which its card does not give"),
        (
            {"predicted_parameters": lambda: Predicted({"parameter_of_broken_effect": np.full(2, np.nan)})},
            "not finite in 2 of 2",
        ),
        ({"cautions": lambda: ["careful"]}, "cautions returned list, expected tuple"),
        ({"cautions": lambda: ("careful",)}, "cautions returned str, expected Caution"),
        ({"closed_form_track": lambda times: times}, "returned ndarray, expected ClosedFormTrack"),
        (
            {"closed_form_track": lambda: ClosedFormTrack(np.ones((2, 1)), np.ones((2, 1)), np.ones(3))},
            "merger_time has shape (3,)",
        ),
        (
            {"closed_form_track": lambda: ClosedFormTrack(np.ones(2), np.ones((2, 1)), np.ones(2))},
            "orbital_period has shape (2,), expected the batch's shape (2, 1)",
        ),
    ],
)
def test_other_hooks_are_checked_too(hooks: dict[str, Callable[..., Any]], expected: str) -> None:
    """Every hook's return is checked, and its fault named."""
    _, said = summed(candidate("broken-effect", **hooks))
    assert len(said) == 1
    assert expected in said[0]


def test_a_misspelt_hook_is_refused() -> None:
    """A hook name that does not exist is refused at loading instead of never being called."""
    _, said = summed(candidate("broken-effect", secular_rate=lambda: Rates({})))
    assert "failed in registration" in said[0]
    assert "secular_rate" in said[0]


def test_an_unknown_argument_is_refused() -> None:
    """A hook that asks for what there is not is refused at loading."""
    _, said = summed(candidate("broken-effect", secular_rates=lambda stat: Rates({})))  # noqa: ARG005  (the fault)
    assert "registration" in said[0]
    assert "stat" in said[0]


def test_a_default_argument_is_refused() -> None:
    """An argument with a default would never be passed, so it is refused."""
    _, said = summed(candidate("broken-effect", secular_rates=lambda state, scale=2.0: Rates({})))  # noqa: ARG005  (the fault)
    assert "default values to scale" in said[0]


def test_a_wrapper_is_refused() -> None:
    """A wrapper, which could change what other effects return, is refused."""

    def wrapper() -> Any:
        return (yield)

    plugin = SimpleNamespace(describe=hook(lambda: card("broken-effect")), secular_rates=hook(wrapper=True)(wrapper))
    _, said = summed(Candidate("broken-effect", "someone-elses", "0.1", lambda: plugin))
    assert "secular_rates is a wrapper" in said[0]


def test_an_effect_without_a_card_is_refused() -> None:
    """Every effect describes itself, by a Card, under the name of its entry point."""
    nameless = Candidate("broken-effect", "x", "0.1", lambda: SimpleNamespace(secular_rates=hook(lambda: Rates({}))))
    assert "no describe() hook" in summed(nameless)[1][0]
    assert "returned str, expected Card" in summed(candidate("broken-effect", describe=lambda: "me"))[1][0]
    assert "named 'other-name'" in summed(candidate("broken-effect", describe=lambda: card("other-name")))[1][0]


def test_a_bad_card_says_what_is_wrong() -> None:
    """A card that needs or gives what is no field, or cites nothing, is refused with the reason."""
    for changes, expected in (
        ({"needs": ("mas_1",)}, "needs: expected a state field, found 'mas_1'"),
        ({"gives": (Rate("orbital_perod"),)}, "gives: expected a state field, found 'orbital_perod'"),
        ({"sources": ()}, "at least one published source"),
        ({"nature": "imaginary"}, "'intrinsic' or 'apparent'"),
        ({"gives": (Rate("orbital_period"), Rate("orbital_period"))}, "each name once"),
    ):

        def described(changes: dict[str, Any] = changes) -> Card:  # the default binds the loop's value
            return card("broken-effect", **changes)

        said = summed(
            Candidate("broken-effect", "x", "0.1", lambda d=described: SimpleNamespace(describe=hook(lambda: d())))
        )[1]
        assert expected in said[0]


def test_two_effects_of_one_name_are_both_refused() -> None:
    """Which of two effects of the same name counts is nobody's guess: both are named and left out."""
    one, other = candidate("twin-effect", "first-dist"), candidate("twin-effect", "second-dist")
    host = load_host([one, other, good()])
    assert [effect.name for effect in host.effects] == ["good-effect"]
    assert "first-dist 0.1 and second-dist 0.1" in str(host.broken[0])


def test_the_order_is_by_name_not_by_luck() -> None:
    """Effects are asked in the order of their names, however they were found."""
    host = load_host([good("c-effect"), good("a-effect"), good("b-effect")])
    names = [contribution.card.name for contribution in host.apply(STATE).secular_rates()]
    assert names == ["a-effect", "b-effect", "c-effect"]


def test_only_and_without_choose() -> None:
    """`only` and `without` leave effects out by name, say so, and hint at misspelt names."""
    host = load_host([good("one-effect"), good("other-effect")])
    assert [e.name for e in host.apply(STATE, only=["one-effect"]).active] == ["one-effect"]
    applied = host.apply(STATE, without=["one-effect"])
    assert [e.name for e in applied.active] == ["other-effect"]
    assert [(idle.effect, idle.reason) for idle in applied.idle] == [("one-effect", "left out on request")]
    with pytest.raises(UnknownEffect, match="did you mean 'other-effect'") as caught:
        host.apply(STATE, only=["other-efect"])
    assert caught.value.nearest == "other-effect"


def test_idle_effects_say_why() -> None:
    """An effect that lacks a field or an own parameter is idle with that reason; one parameter may lack a field."""
    needy = candidate("needy-effect", describe=lambda: card("needy-effect", needs=("distance", "mass_1")))
    own = candidate(
        "own-effect",
        describe=lambda: card(
            "own-effect", parameters=(OwnParameter("ring_mass", "Msun", "mass of the ring"),), gives=()
        ),
    )
    partly = candidate(
        "partly-effect",
        describe=lambda: card("partly-effect", gives=(Parameter("shape", "", "shape", needs=("sin_inclination",)),)),
    )
    idle = [(i.effect, i.reason) for i in load_host([needy, own, partly]).apply(STATE).idle]
    assert idle == [
        ("needy-effect", "needs distance"),
        ("own-effect", "needs ring_mass in [effects.own-effect]"),
        ("partly-effect", "shape needs sin_inclination"),
    ]


def test_own_parameters_arrive_broadcast_and_locked() -> None:
    """Own parameters come by default or as given, of the batch's shape, read-only; wrong names are refused."""
    seen: list[Any] = []

    def rates(settings: Any) -> Rates:
        seen.append(settings)
        return Rates({"orbital_period": settings["scale"] * 1.0})

    own = candidate(
        "own-effect",
        describe=lambda: card("own-effect", parameters=(OwnParameter("scale", "", "scale", default=2.0),)),
        secular_rates=rates,
    )
    host = load_host([own])
    assert host.apply(STATE).secular_rates()[0].values.tolist() == [2.0, 2.0]
    assert host.apply(STATE, {"own-effect": {"scale": [3.0, 4.0]}}).secular_rates()[0].values.tolist() == [3.0, 4.0]
    with pytest.raises(ValueError, match="read-only"):
        seen[0]["scale"][0] = 1.0
    with pytest.raises(TypeError, match="assignment"):
        seen[0]["scale"] = 1.0
    with pytest.raises(BadInput, match=r"no parameter 'scael'; did you mean 'scale'\?"):
        host.apply(STATE, {"own-effect": {"scael": 1.0}})


def test_replacing_and_rivals() -> None:
    """A replaced effect steps back; two that replace one, or predict one parameter, are refused naming both."""
    theory = candidate("theory-effect", describe=lambda: card("theory-effect", replaces=("good-effect",)))
    idle = load_host([good(), theory]).apply(STATE, without=[]).idle
    assert ("good-effect", "replaced by theory-effect") in [(i.effect, i.reason) for i in idle]
    second = candidate("second-theory", describe=lambda: card("second-theory", replaces=("good-effect",), gives=()))
    with pytest.raises(BadInput, match="'second-theory' and 'theory-effect' both replace 'good-effect'"):
        load_host([good(), theory, second]).apply(STATE)
    gives = (Parameter("twice_predicted", "s", "invented"),)
    rivals = [
        candidate("a-effect", describe=lambda: card("a-effect", gives=gives)),
        candidate("b-effect", describe=lambda: card("b-effect", gives=gives)),
    ]
    with pytest.raises(BadInput, match="'a-effect' and 'b-effect' both predict twice_predicted"):
        load_host(rivals).apply(STATE)


def test_a_parameter_without_meaning_is_marked_only_where_declared() -> None:
    """NaN is allowed only for a parameter that declares when it has a meaning."""
    gives = (Parameter("shape", "", "shape", defined_where="sin i <= 1"),)
    shy = candidate(
        "shy-effect",
        describe=lambda: card("shy-effect", gives=gives),
        predicted_parameters=lambda: Predicted({"shape": np.array([0.5, np.nan])}),
    )
    contribution = load_host([shy]).apply(STATE).predicted_parameters()[0]
    assert np.isnan(contribution.values).tolist() == [False, True]
    assert contribution.defined_where == "sin i <= 1"


def test_cautions_are_kept_with_their_effect() -> None:
    """A caution comes with the name of the effect that gave it."""
    wary = candidate("wary-effect", cautions=lambda: (Caution("thin ice"),))
    assert [(name, c.statement) for name, c in load_host([wary]).apply(STATE).cautions()] == [
        ("wary-effect", "thin ice")
    ]


def test_the_built_in_effects_come_by_entry_points() -> None:
    """The built-in effects are found as a third party's are, and all of them load."""
    names = {found.name for found in installed_candidates() if found.distribution == "clockfall"}
    assert {"quadrupole-decay", "periastron-advance", "einstein-delay", "shapiro-delay"} <= names
    host = load_host([found for found in installed_candidates() if found.distribution == "clockfall"])
    assert not host.broken
    assert {effect.name for effect in host.effects} == names


@pytest.mark.parametrize("blocked", ["quadrupole-decay", "periastron-advance", "einstein-delay", "shapiro-delay"])
def test_the_core_needs_no_built_in_effect(blocked: str) -> None:
    """With any one built-in effect not installed, the others still contribute."""
    found = [c for c in installed_candidates() if c.distribution == "clockfall" and c.name != blocked]
    applied = load_host(found).apply(STATE)
    contributions = {c.card.name for c in (*applied.secular_rates(), *applied.predicted_parameters())}
    assert contributions
    assert blocked not in contributions
    assert not applied.failures


def an_orbit() -> Orbit:
    """Return an orbit at three times."""
    state = STATE.replace(projected_semi_major_axis=2.0, periastron_epoch=Epoch(57000, 0.0))
    zero = np.zeros(2)
    return SecularMotion(state, *([zero] * 7)).at(np.broadcast_to(np.array([0.0, 1e4, 2e4]), (2, 3)))


def changes_the_orbit(orbit: Orbit) -> Delay:
    """Try to change an array that all effects share."""
    orbit.sin_E[0, 0] = 5.0
    return Delay(orbit.sin_E)


BAD_DELAYS: dict[str, tuple[Callable[..., Any], str]] = {
    "plain array": (lambda orbit: orbit.sin_E, "returned ndarray, expected Delay"),
    "another shape": (lambda: Delay(np.ones(4)), "seconds has shape (4,), expected the batch's shape (2, 3)"),
    "nan": (lambda orbit: Delay(np.full(orbit.shape, np.nan)), "seconds is not finite in 6 of 6"),
    "rate of another shape": (lambda orbit: Delay(orbit.sin_E, np.ones(4)), "rate has shape (4,)"),
    "integers": (lambda orbit: Delay(np.ones(orbit.shape, dtype=int)), "seconds is an array of int64"),
    "raises": (lambda orbit: orbit.no_such_thing, "AttributeError"),
    "changes the orbit": (changes_the_orbit, "read-only"),
}


@pytest.mark.parametrize("fault", list(BAD_DELAYS))
def test_a_bad_delay_is_named(fault: str) -> None:
    """A delay that cannot be added is told with the effect, the hook and what is wrong; other delays stand."""
    function, expected = BAD_DELAYS[fault]
    bad = candidate("broken-effect", describe=lambda: card("broken-effect", delay="broken"), delay=function)
    fine = candidate(
        "fine-effect", describe=lambda: card("fine-effect", delay="one second"), delay=lambda: Delay(np.float64(1.0))
    )
    orbit = an_orbit()
    applied = load_host([bad, fine]).apply(STATE)
    found = applied.delays(orbit, {})
    assert [(by.name, float(delay.seconds[1, 2])) for by, delay in found] == [("fine-effect", 1.0)]
    said = str(applied.failures[0])
    assert "broken-effect" in said
    assert "failed in delay" in said
    assert expected in said
    with pytest.raises(EffectError):
        load_host([bad, fine], strict=True).apply(STATE).delays(orbit, {})


def test_a_delay_that_the_card_does_not_describe() -> None:
    """An effect has the delay hook if and only if its card says what the delay is; otherwise it is left out by name."""
    silent = candidate("silent-effect", delay=lambda orbit: Delay(orbit.sin_E))
    boastful = candidate("boastful-effect", describe=lambda: card("boastful-effect", delay="none at all"))
    _, said = summed(silent, boastful)
    assert len(said) == 2
    assert all("its card describes a delay if and only if" in text for text in said)
