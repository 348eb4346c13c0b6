"""From masses, period and eccentricity to merger: the numbers that a teaching lab checks."""

from __future__ import annotations

from typing import Final

import numpy as np

from clockfall.analysis.budget import merger_time
from clockfall.analysis.outcome import Drawn, Finding, Outcome
from clockfall.analysis.study import Choices, Study, applied_to
from clockfall.analysis.system import System
from clockfall.analysis.weighing import study
from clockfall.effects.host import Host

STAGES: Final = (0.0, 0.5, 0.9, 0.99, 0.999)
"""The shares of the merger time at which the orbit is shown."""


def inspiral(host: Host, system: System, choices: Choices | None = None) -> Outcome:
    """Return the time to merger and what leads to it.

    Returns
    -------
    Outcome
        ``merger_time`` [s], ``orbital_period_rate`` [s/s], ``eccentricity_rate`` [1/s], ``semi_major_axis`` and
        ``periastron_separation`` [ls], ``orbital_velocity`` [c], ``chirp_mass`` [Msun]; and the orbit at `STAGES` of
        the way, as ``orbital_period``, ``eccentricity``, ``semi_major_axis`` with roles ``stage_0``, ``stage_1``, ...
    """
    of = study(host, system, choices)
    state = of.sample.state
    findings: list[Finding] = []
    merger, cautions = merger_time(of)
    findings += merger
    for name in ("orbital_period_rate", "eccentricity_rate", "longitude_of_periastron_rate"):
        if name in of.predicted:
            p = of.predicted[name]
            findings.append(of.finding(name, "", p.intrinsic, p.unit, p.shown_in, p.meaning))
    a, beta, chirp_mass, rest = state.known(
        "relative_semi_major_axis", "orbital_velocity", "chirp_mass", "one_minus_eccentricity"
    )
    findings += [
        of.finding("semi_major_axis", "", a, "ls", "km", "semi-major axis of the relative orbit"),
        of.finding("periastron_separation", "", a * rest, "ls", "km", "separation at periastron"),
        of.finding("orbital_velocity", "", beta, "", "", "speed on the circular orbit of this period, in c"),
        of.finding("chirp_mass", "", chirp_mass, "Msun", "Msun", "chirp mass"),
    ]
    stages = _stages(host, of, merger[0].drawn.central) if merger else []
    return of.outcome([*findings, *stages], {}, cautions)


def _stages(host: Host, of: Study, T: float) -> list[Finding]:
    """Return the central binary's orbit at each stage of its way to merger after T [s]."""
    central = of.sample.central()
    times = T * np.array(STAGES)
    offered = applied_to(host, central, of.choices).closed_form_track(times)
    if offered is None:
        return []
    period, eccentricity = offered[1].orbital_period[0], offered[1].eccentricity[0]
    separation = central.state.replace(orbital_period=period).relative_semi_major_axis
    nothing = np.empty(0)
    found = []
    for k, share in enumerate(STAGES):
        after = f"after {share:.1%} of the time to merger"
        found += [
            Finding("time", f"stage_{k}", Drawn(float(times[k]), nothing), "s", "yr", after),
            Finding("orbital_period", f"stage_{k}", Drawn(float(period[k]), nothing), "s", "s", after),
            Finding("eccentricity", f"stage_{k}", Drawn(float(eccentricity[k]), nothing), "", "", after),
        ]
        if separation is not None:
            drawn = Drawn(float(separation[k]), nothing)
            found.append(Finding("semi_major_axis", f"stage_{k}", drawn, "ls", "km", after))
    return found
