"""A study: one system drawn, its masses known, its effects sorted; the start of every analysis."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace
from functools import reduce
from types import MappingProxyType
from typing import Literal

import numpy as np

from clockfall.analysis.draws import DEFAULT_DRAWS, DEFAULT_SEED, Sample
from clockfall.analysis.outcome import Column, Drawn, Finding, Outcome, Said, UsedEffect
from clockfall.analysis.system import System
from clockfall.binary.epoch import Epoch
from clockfall.binary.ranges import FloatArray
from clockfall.binary.state import BinaryState
from clockfall.effects.checks import Contribution
from clockfall.effects.contributions import Settings
from clockfall.effects.host import Applied, Host

By = Literal["arrival", "emission"]
RatesFrom = Literal["predicted", "measured"]


@dataclass(frozen=True, slots=True)
class Choices:
    """What a user chose beside the system file.

    Attributes
    ----------
    draws, seed : int
        Of the sample.
    only, without : tuples of effect names
        Added to what the system file says; `only` stands in for the file's.
    use : tuple of str
        The measured parameters that weigh the two bodies; empty for the default pair.
    solve_for, limit : str
        The inverse questions put to the decay: a field, and an own parameter ``<effect>.<parameter>``; "" for none.
    times : Epoch or None, shape (times,)
        At which delays are wanted; None for `phases` of one orbit, evenly spaced in the mean anomaly.
    by : "arrival" or "emission"
        Which of the two `times` are.
    rates : "predicted" or "measured"
        Whether the orbit runs by the effects' rates, or by what was measured where it was.
    """

    draws: int = DEFAULT_DRAWS
    seed: int = DEFAULT_SEED
    only: tuple[str, ...] | None = None
    without: tuple[str, ...] = ()
    use: tuple[str, ...] = ()
    solve_for: str = ""
    limit: str = ""
    times: Epoch | None = None
    phases: int = 24
    by: By = "arrival"
    rates: RatesFrom = "predicted"

    def with_system(self, system: System) -> Choices:
        """Return these choices joined with those of the system file."""
        only = self.only if self.only is not None else system.only
        return replace(self, only=only, without=(*system.without, *self.without))


@dataclass(frozen=True, slots=True)
class Prediction:
    """One predicted number, summed over effects; NaN where it has no meaning.

    Attributes
    ----------
    intrinsic, apparent : array, shape batch [unit]
        Sums by nature; a parameter that is no rate is all intrinsic.
    contributions : tuple of Contribution
        What was summed.
    set_by_file : tuple of str
        Apparent effects in whose place the system file gives the apparent part.
    """

    name: str
    unit: str
    shown_in: str
    meaning: str
    intrinsic: FloatArray
    apparent: FloatArray
    contributions: tuple[Contribution, ...]
    set_by_file: tuple[str, ...] = ()

    @property
    def total(self) -> FloatArray:
        """As it should be observed."""
        return self.intrinsic + self.apparent


def predictions(applied: Applied, given_apparent: Mapping[str, FloatArray]) -> Mapping[str, Prediction]:
    """Sum what the effects contribute, by name of rate or parameter.

    Where the system gives an apparent part itself, that stands in for what apparent effects contribute to this rate.
    """
    by_name: dict[str, list[Contribution]] = {}
    for contribution in (*applied.secular_rates(), *applied.predicted_parameters()):
        by_name.setdefault(contribution.name, []).append(contribution)
    summed = {}
    for name, found in by_name.items():
        unused = [part for part in found if name in given_apparent and part.card.nature == "apparent"]
        parts = [part for part in found if all(part is not other for other in unused)]
        intrinsic, apparent = (_sum(parts, nature, applied.state.shape) for nature in ("intrinsic", "apparent"))
        first = found[0]
        summed[name] = Prediction(
            name,
            first.unit,
            first.shown_in,
            first.meaning,
            intrinsic,
            np.broadcast_to(given_apparent.get(name, apparent), applied.state.shape),
            tuple(parts),
            tuple(part.card.name for part in unused),
        )
    return MappingProxyType(summed)


def _sum(parts: Iterable[Contribution], nature: str, shape: tuple[int, ...]) -> FloatArray:
    values = [part.values for part in parts if part.card.nature == nature]
    return reduce(np.add, values) if values else np.broadcast_to(0.0, shape)


def applied_to(host: Host, sample: Sample, choices: Choices, state: BinaryState | None = None) -> Applied:
    """Return the effects that the choices leave, applied to a sample, or to `state` in the place of its own."""
    state = sample.state if state is None else state
    return host.apply(state, sample.own, only=choices.only, without=choices.without)


def predicted_at(host: Host, sample: Sample, choices: Choices, state: BinaryState) -> Mapping[str, Prediction]:
    """Return what the effects predict of a sample whose state is another, with trial masses for instance."""
    return predictions(applied_to(host, sample, choices, state), sample.apparent)


@dataclass(frozen=True, slots=True)
class Study:
    """A system ready to be analysed.

    Attributes
    ----------
    sample : Sample
        With both masses in its state, given or weighed.
    applied : Applied
        The effects, sorted for that state.
    predicted : mapping of name to Prediction
        All sums.
    masses_from : str
        "given" or "weighed".
    cautions : tuple of Said
        What came up on the way.
    """

    system: System
    choices: Choices
    sample: Sample
    applied: Applied
    predicted: Mapping[str, Prediction]
    masses_from: str
    used: tuple[str, ...] = ()
    cautions: tuple[Said, ...] = ()

    def finding(self, quantity: str, role: str, values: FloatArray, unit: str, shown_in: str, meaning: str) -> Finding:
        """Return a finding from an array over the batch."""
        return Finding(quantity, role, Drawn.from_batch(values, self.sample.possible), unit, shown_in, meaning)

    def contribution(self, contribution: Contribution) -> Finding:
        """Return one effect's contribution as a finding."""
        plain = self.finding(
            contribution.name,
            "contribution",
            contribution.values,
            contribution.unit,
            contribution.shown_in,
            contribution.card.summary,
        )
        card = contribution.card
        return replace(plain, effect=card.name, nature=card.nature, sources=card.sources)

    def outcome(
        self,
        findings: Iterable[Finding],
        facts: Mapping[str, str],
        cautions: Iterable[Said] = (),
        columns: tuple[Column, ...] = (),
    ) -> Outcome:
        """Close the study: findings with all that is to be said beside them."""
        applied, findings = self.applied, tuple(findings)
        stood_for = {said.effect for said in self._set_by_file()} - {finding.effect for finding in findings}
        by_effects = [
            Said(effect, caution.statement) for effect, caution in applied.cautions() if effect not in stood_for
        ]
        return Outcome(
            findings=findings,
            facts=MappingProxyType({**self._facts(), **facts}),
            used=tuple(
                UsedEffect(e.name, e.version, e.distribution, _settings_text(applied.settings_of(e)))
                for e in applied.active
            ),
            idle=(*(Said(idle.effect, idle.reason) for idle in applied.idle), *self._set_by_file()),
            failed=tuple(Said(error.effect, str(error)) for error in applied.failures),
            cautions=(*self.cautions, *_set_aside(self), *_of_the_distance(self.system), *cautions, *by_effects),
            draws=self.sample.draws,
            seed=self.sample.seed,
            columns=columns,
        )

    def _set_by_file(self) -> Iterable[Said]:
        for prediction in self.predicted.values():
            for effect in prediction.set_by_file:
                yield Said(effect, f"the system file gives the apparent part of {prediction.name}")

    def _facts(self) -> dict[str, str]:
        own = {"system": self.system.name, "masses_from": self.masses_from}
        if self.used:
            own["used"] = " ".join(self.used)
        epoch = self.system.periastron_epoch
        return own if epoch is None else {**own, "epoch_mjd_tdb": str(epoch.to_decimal())}


def _settings_text(settings: Settings) -> str:
    """Write the central values of an effect's own parameters, and its choices, as JSON."""
    own: dict[str, float | str] = {name: float(values[0]) for name, values in settings.items()}
    return json.dumps({**own, **settings.choices}) if own or settings.choices else ""


def _of_the_distance(system: System) -> Iterable[Said]:
    """Say how a parallax became a distance."""
    if system.parallax is not None:
        ways = {"none": "its reciprocal, without a prior", "volume": "equal numbers in equal volumes up to 25 kpc"}
        yield Said("", f"the distance is from the parallax: {ways[system.distance_prior]}")


def _set_aside(study: Study) -> Iterable[Said]:
    """Say which draws were set aside, and why."""
    sample = study.sample
    for name, count in sample.set_aside.items():
        yield Said("", f"{name}: {count} of {sample.draws} draws fell outside its range and are set aside")
    for prediction in study.predicted.values():
        for part in prediction.contributions:
            lost = int(np.sum(np.isnan(part.values[1:]) & sample.possible[1:]))
            if lost:
                share = lost / sample.draws
                yield Said(
                    part.card.name, f"{part.name}: {share:.1%} of the draws set aside, which lack {part.defined_where}"
                )
