"""The budget of a rate: what each effect adds, their sum, the measurement, and the ratio of the two."""

from __future__ import annotations

import numpy as np

from clockfall.analysis.comparison import comparison, contradictions
from clockfall.analysis.outcome import Drawn, Finding, Outcome, Said
from clockfall.analysis.study import Choices, Prediction, Study
from clockfall.analysis.system import System
from clockfall.analysis.weighing import study
from clockfall.binary.ranges import FloatArray
from clockfall.effects.host import Host

DECAY = "orbital_period_rate"


def decay(host: Host, system: System, choices: Choices | None = None) -> Outcome:
    """Return the budget of the orbital period's rate, and the time to merger.

    Returns
    -------
    Outcome
        Findings of ``orbital_period_rate``: one ``contribution`` for each effect, ``predicted_intrinsic``,
        ``apparent``, ``measured``, ``intrinsic_observed``, ``ratio``, ``tension_sigma``; ``mass_1``, ``mass_2``
        [Msun]; ``merger_time`` [s]. What the system does not allow is left out.

    Raises
    ------
    CannotWeigh
        The masses are neither given nor to be had from what was measured.
    """
    of = study(host, system, choices)
    m_1, m_2 = of.sample.state.known("mass_1", "mass_2")
    findings = [
        *budget(of, DECAY),
        of.finding("mass_1", "", m_1, "Msun", "Msun", "mass of body 1, the timed one"),
        of.finding("mass_2", "", m_2, "Msun", "Msun", "mass of body 2, the companion"),
    ]
    merger, cautions = merger_time(of)
    return of.outcome([*findings, *merger], {"rate": DECAY}, [*contradictions(of), *_unexplained(of), *cautions])


def budget(of: Study, rate: str) -> list[Finding]:
    """Return the budget of one rate as findings; empty where nothing is predicted or measured."""
    prediction = of.predicted.get(rate)
    if prediction is None:
        return []
    parts = contributions(of, prediction)

    def total(role: str, values: FloatArray, meaning: str) -> Finding:
        return of.finding(rate, role, values, prediction.unit, prediction.shown_in, meaning)

    totals = [total("apparent", prediction.apparent, "sum of the apparent contributions")]
    if has_theory(prediction):
        totals.insert(0, total("predicted_intrinsic", prediction.intrinsic, "sum of the intrinsic contributions"))
    if rate not in of.sample.measured:
        return [*parts, *totals]
    measured = total("measured", of.sample.measured[rate], "as measured")
    if rate in of.used:
        return [*parts, *totals, measured]  # it weighed the bodies, so it agrees whatever the theory
    compared = comparison(of, prediction)
    renamed = {"observed": "intrinsic_observed"}
    kept = [
        Finding(f.quantity, renamed.get(f.role, f.role), f.drawn, f.unit, f.shown_in, f.meaning)
        for f in compared
        if f.role != "predicted"
    ]
    return [*parts, *totals, measured, *kept]


_SUMS = (
    ("predicted_intrinsic", "predicted", "intrinsic"),
    ("apparent", "apparent parts", "apparent"),
    ("measured", "measured", "as seen"),
    ("intrinsic_observed", "measured, apparent off", "intrinsic"),
)


def sums(outcome: Outcome, rate: str) -> list[tuple[str, str, Finding]]:
    """Return what stands below the contributions to a rate: (words, nature, finding); without apparent parts less."""
    has_apparent = any(part.nature == "apparent" for part in outcome.contributions(rate))
    kept = [row for row in _SUMS if has_apparent or row[0] in ("predicted_intrinsic", "measured")]
    return [(label, nature, f) for role, label, nature in kept if (f := outcome.get(rate, role))]


def has_theory(prediction: Prediction | None) -> bool:
    """Whether any effect says how the orbit itself changes; otherwise the prediction is not zero, there is none."""
    return prediction is not None and any(part.card.nature == "intrinsic" for part in prediction.contributions)


def contributions(of: Study, prediction: Prediction) -> list[Finding]:
    """Return what each effect contributes to a rate, and what the system file gives for the apparent part."""
    by_effects = [of.contribution(part) for part in prediction.contributions]
    if prediction.name not in of.sample.apparent:
        return by_effects
    return [*by_effects, _given_apparent(of, prediction)]


def _given_apparent(of: Study, prediction: Prediction) -> Finding:
    """Return the apparent part that the system file gives itself."""
    drawn = Drawn.from_batch(of.sample.apparent[prediction.name], of.sample.possible)
    return Finding(
        prediction.name,
        "contribution",
        drawn,
        prediction.unit,
        prediction.shown_in,
        "apparent part given in the system file",
        effect="given",
        nature="apparent",
        sources=(f"the system file's [apparent] {prediction.name}",),
    )


def _unexplained(of: Study) -> list[Said]:
    """Say what a reader of the budget should know about its ground."""
    said = []
    if DECAY in of.used:
        said.append(Said("", "the decay itself weighed the bodies, so it is no test of theory and has no ratio"))
    if not has_theory(of.predicted.get(DECAY)):
        said.append(Said("", "no active effect contributes to the orbit's own decay, so nothing is predicted"))
    if DECAY in of.sample.measured and DECAY not in of.sample.apparent:
        apparent = of.predicted.get(DECAY)
        if apparent is not None and not np.any(apparent.apparent):
            said.append(Said("", "no apparent part (proper motion, Galaxy) is known, so none is taken off"))
    return said


def merger_time(of: Study) -> tuple[list[Finding], list[Said]]:
    """Return the time to merger [s] by the first effect that has it in closed form, and what it leaves out."""
    offered = of.applied.closed_form_track(np.empty(0))
    if offered is None:
        return [], []
    effect, track = offered
    finding = of.finding(
        "merger_time", "", np.asarray(track.merger_time), "s", "yr", f"time to merger by {effect} alone"
    )
    others = of.applied.others_changing_the_orbit(effect)
    said = [Said(effect, f"merger time by {effect} alone; it leaves out {', '.join(others)}")] if others else []
    return [finding], said
