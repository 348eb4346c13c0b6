"""Every secular rate and every predicted parameter, by effect."""

from __future__ import annotations

from dataclasses import replace

from clockfall.analysis.budget import contributions
from clockfall.analysis.comparison import contradictions
from clockfall.analysis.outcome import Finding, Outcome
from clockfall.analysis.study import Choices, Prediction, Study
from clockfall.analysis.system import System
from clockfall.analysis.weighing import study
from clockfall.effects.host import Host


def rates(host: Host, system: System, choices: Choices | None = None) -> Outcome:
    """Sum every rate and list every predicted parameter.

    Returns
    -------
    Outcome
        For each rate a ``total`` and one ``contribution`` for each effect; for each parameter ``predicted``; for
        what was measured also ``measured``.

    Raises
    ------
    CannotWeigh
        The masses are neither given nor to be had from what was measured.
    """
    of = study(host, system, choices)
    findings = [finding for prediction in of.predicted.values() for finding in _lines(of, prediction)]
    return of.outcome(findings, {}, contradictions(of))


def _lines(of: Study, prediction: Prediction) -> list[Finding]:
    name, unit, shown_in = prediction.name, prediction.unit, prediction.shown_in
    card = prediction.contributions[0].card if prediction.contributions else None
    is_parameter = card is not None and any(parameter.name == name for parameter in card.predicts)
    total = of.finding(
        name, "predicted" if is_parameter else "total", prediction.total, unit, shown_in, prediction.meaning
    )
    lines = [total]
    if is_parameter and card is not None:
        lines = [replace(total, effect=card.name, nature=card.nature, sources=card.sources)]
    else:
        lines += contributions(of, prediction)
    if name in of.sample.measured:
        lines.append(of.finding(name, "measured", of.sample.measured[name], unit, shown_in, "as measured"))
    return lines
