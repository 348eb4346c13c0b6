"""`clockfall inspiral`: time to merger, for a teaching lab, without a file."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable, Iterator
from typing import TYPE_CHECKING, Any

import click
import numpy as np

from clockfall.analysis.inspiral import STAGES, inspiral
from clockfall.analysis.outcome import Finding, Outcome
from clockfall.app.analyses import Analysis, Block
from clockfall.app.numbers import as_json, as_text, time_unit
from clockfall.app.options import Wishes, analysis_options, run_analysis
from clockfall.binary.constants import T_SUN
from clockfall.effects.card import Card
from clockfall.errors import BadInput

if TYPE_CHECKING:
    from clockfall.files.system_file import SystemFile

_NUMBERS = (
    "merger_time",
    "orbital_period_rate",
    "eccentricity_rate",
    "longitude_of_periastron_rate",
    "semi_major_axis",
    "periastron_separation",
    "orbital_velocity",
    "chirp_mass",
)


def report(outcome: Outcome) -> dict[str, Any]:
    """Return the numbers, and the stages on the way, as programs read them."""
    found = {name: finding for name in _NUMBERS if (finding := outcome.get(name))}
    return {
        **{name: as_json(finding) for name, finding in found.items()},
        "stages": [
            {quantity: as_json(finding) for quantity, finding in stage.items()} for _, stage in _stages(outcome)
        ],
    }


def _stages(outcome: Outcome) -> Iterator[tuple[float, dict[str, Finding]]]:
    for k, share in enumerate(STAGES):
        stage = {f.quantity: f for f in outcome.findings if f.role == f"stage_{k}"}
        if stage:
            yield share, stage


def blocks(outcome: Outcome) -> Iterator[Block]:
    """Yield the numbers, and the stages on the way."""
    found = [finding for name in _NUMBERS if (finding := outcome.get(name))]
    rows = tuple(
        (f.quantity, as_text(f, time_unit(f) if f.quantity == "merger_time" else ""), f.meaning) for f in found
    )
    yield Block(rows, ("quantity", "value", "meaning"))
    stages = list(_stages(outcome))
    if stages:
        columns = [[f"{share:.1%}" for share, _ in stages]]
        columns += [[_stage_text(stage, q) for _, stage in stages] for q in stages[0][1]]
        heading = ("share of time", *(q.replace("_", " ") for q in stages[0][1]))
        yield Block(tuple(zip(*columns, strict=True)), heading, "On the way to merger (central values)")


def _stage_text(stage: dict[str, Finding], quantity: str) -> str:
    finding = stage[quantity]
    if not math.isfinite(finding.drawn.central):
        return "merged"
    is_time = quantity in ("time", "orbital_period")
    from clockfall.files.units import factor  # astropy, not needed for --help

    unit = time_unit(finding) if is_time else finding.shown_in
    return f"{finding.drawn.central * factor(finding.unit, unit):.5g} {unit}".strip()


def headline(outcome: Outcome) -> str:
    """Return the time to merger."""
    merger = outcome.get("merger_time")
    return "no active effect leads to merger" if merger is None else as_text(merger, time_unit(merger))


ANALYSIS = Analysis("inspiral", inspiral, report, blocks, headline)


@click.command("inspiral")
@click.option("--mass-1", metavar="MASS", help='For instance "1.4 Msun", or "1.4(1) Msun".')
@click.option("--mass-2", metavar="MASS", help="Likewise.")
@click.option("--orbital-period", metavar="TIME", help='For instance "7.75 h".')
@click.option("--semi-major-axis", metavar="LENGTH", help='Instead of the period: "1.95e6 km", "2.8 Rsun".')
@click.option("--wave-frequency", metavar="FREQUENCY", help='Instead of the period: twice the orbital one, "10 Hz".')
@click.option("--eccentricity", metavar="NUMBER", help="0 <= e < 1; default 0.")
@click.option("--one-minus-eccentricity", metavar="NUMBER", help="Instead, where e is very near 1.")
@analysis_options
def command(wishes: Wishes, **given: str | None) -> None:
    """Time to merger from masses, period and eccentricity, and what leads to it.

    Values are texts with a unit, and may carry an uncertainty: "1.4(1) Msun", "7.75 +/- 0.01 h". Without any, the
    demo binary is taken.
    """
    named = {name: text for name, text in given.items() if text is not None}
    run_analysis(ANALYSIS, _reader(named) if named else None, wishes)


def _reader(given: dict[str, str]) -> Callable[[Iterable[Card]], SystemFile]:
    """Return a function that makes a system of the options; the result file then holds it as a system file."""

    def read(cards: Iterable[Card]) -> SystemFile:
        from clockfall.files.system_file import parse_system  # astropy, not needed for --help

        values = dict(given)
        for mass in ("mass_1", "mass_2"):
            if mass not in values:
                raise BadInput(f"--{mass.replace('_', '-')} is missing; for instance --mass-1 '1.4 Msun'")
        values["orbital_period"] = _period(values)
        if "one_minus_eccentricity" not in values:
            values.setdefault("eccentricity", "0")
        name = f"{values['mass_1']} and {values['mass_2']}"
        lines = ["[system]", f"name = {_toml(name)}", "[masses]"]
        lines += [f"{name} = {_toml(values.pop(name))}" for name in ("mass_1", "mass_2")]
        lines += ["[orbit]", *(f"{name} = {_toml(value)}" for name, value in values.items())]
        return parse_system("\n".join(lines) + "\n", cards, name="the options")

    return read


def _toml(text: str) -> str:
    """Return a TOML string holding any text."""
    import json  # a JSON string is a TOML basic string

    return json.dumps(text, ensure_ascii=True)


def _period(values: dict[str, str]) -> str:
    """Take what says the size of the orbit out of `values`; return it as a period."""
    named = [name for name in ("orbital_period", "semi_major_axis", "wave_frequency") if name in values]
    if len(named) != 1:
        raise BadInput("give one of --orbital-period, --semi-major-axis and --wave-frequency")
    text = values.pop(named[0])
    if named[0] == "orbital_period":
        return text
    if named[0] == "wave_frequency":
        frequency = _exact(text, "1/s", "--wave-frequency")
        return f"{2.0 / frequency!r} s"
    total = sum(_exact(values[name], "Msun", f"--{name.replace('_', '-')}") for name in ("mass_1", "mass_2"))
    a = _exact(text, "ls", "--semi-major-axis")
    return f"{2.0 * math.pi * math.sqrt(a**3 / (T_SUN * total))!r} s"


def _exact(text: str, unit: str, option: str) -> float:
    """Return a positive value without uncertainty, in `unit`."""
    from clockfall.files.quantity import parse_quantity  # as above
    from clockfall.files.units import factor  # as above

    quantity = parse_quantity(text)
    if quantity.plus or quantity.minus:
        raise BadInput(f"{option}: {text!r} has an uncertainty, which only --orbital-period can carry; leave it out")
    value = float(quantity.value) * factor(quantity.unit, unit)
    if not (np.isfinite(value) and value > 0.0):
        raise BadInput(f"{option}: expected a positive number [{unit}], found {text!r}")
    return value
