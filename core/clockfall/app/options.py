"""The options that commands share, and the steps that every analysis takes."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeVar

import click

from clockfall.analysis.draws import DEFAULT_DRAWS, DEFAULT_SEED, MOST_DRAWS
from clockfall.analysis.study import Choices

if TYPE_CHECKING:
    from clockfall.app.analyses import Analysis
    from clockfall.files.system_file import SystemFile

F = TypeVar("F", bound=Callable[..., Any])


@dataclass(frozen=True, slots=True)
class Wishes:
    """What a user wishes of an analysis: the choices, and where the numbers go."""

    choices: Choices
    as_json: bool
    out: Path | None
    overwrite: bool
    quiet: bool
    strict: bool
    picture: Path | None = None


def analysis_options(command: F) -> F:
    """Add the options that every analysis has; the command receives them as one `Wishes`."""
    options = [
        click.option("--json", "as_json", is_flag=True, help="Print JSON with full precision, and nothing else."),
        click.option(
            "--out", type=click.Path(path_type=Path), help="Write the result, with all draws, to this HDF5 file."
        ),
        click.option("--overwrite", is_flag=True, help="Let --out and --draw replace a file."),
        click.option("--only", multiple=True, metavar="EFFECT", help="Use this effect and no other (repeatable)."),
        click.option("--without", multiple=True, metavar="EFFECT", help="Leave this effect out (repeatable)."),
        click.option(
            "--use",
            multiple=True,
            metavar="PARAMETER",
            help="Weigh the bodies by this measured parameter (twice or more).",
        ),
        click.option(
            "--draws",
            type=click.IntRange(1, MOST_DRAWS),
            metavar="N",
            default=DEFAULT_DRAWS,
            show_default=True,
            help="How many draws carry the uncertainties.",
        ),
        click.option(
            "--seed",
            type=click.IntRange(0, 2**63 - 1),
            metavar="N",
            default=DEFAULT_SEED,
            show_default=True,
            help="Of the draws.",
        ),
        click.option("--strict", is_flag=True, help="End at the first effect that fails, instead of leaving it out."),
        click.option("--quiet", "-q", is_flag=True, help="Print the main number alone."),
        click.option("--debug", is_flag=True, help="Show the traceback of an error."),
    ]
    wrapped: Any = _gathering(command)
    for option in reversed(options):
        wrapped = option(wrapped)
    return wrapped  # type: ignore[no-any-return]  # click's decorators keep the function


def draw_option(command: F) -> F:
    """Add --draw; the command hands it on in its `Wishes`."""
    return click.option(
        "--draw", "picture", type=click.Path(path_type=Path), help="Draw the result to this .svg, .pdf or .png."
    )(command)


def _gathering(command: Callable[..., Any]) -> Callable[..., Any]:
    """Return `command` taking its shared options as one `Wishes`."""

    def gathered(
        *,
        as_json: bool,
        out: Path | None,
        overwrite: bool,
        only: tuple[str, ...],
        without: tuple[str, ...],
        use: tuple[str, ...],
        draws: int,
        seed: int,
        strict: bool,
        quiet: bool,
        debug: bool,
        **own: Any,
    ) -> Any:
        del debug  # read by clockfall.app.main before any option is parsed
        choices = Choices(draws, seed, only or None, without, use)
        return command(wishes=Wishes(choices, as_json, out, overwrite, quiet, strict), **own)

    gathered.__name__ = command.__name__
    gathered.__doc__ = command.__doc__
    return gathered


def run_analysis(analysis: Analysis, system: Path | Callable[[Any], SystemFile] | None, wishes: Wishes) -> None:
    """Read, compute, write, print.

    Parameters
    ----------
    system : Path, callable or None
        A system file; a function from cards to one; or None for the demo.
    """
    from clockfall.app.printing import print_outcome  # rich, 0.1 s
    from clockfall.effects.loading import load_host  # the effects
    from clockfall.files.results import Result, current_versions, write_result
    from clockfall.files.system_file import demo_system, read_system  # units
    from clockfall.files.whole import check_target

    if wishes.out is not None:
        check_target(wishes.out, overwrite=wishes.overwrite)
    if wishes.picture is not None:
        from clockfall.app.pictures import draw_to  # matplotlib, 0.4 s
        from clockfall.figures.saving import check_picture

        check_picture(wishes.picture, overwrite=wishes.overwrite)
    host = load_host(strict=wishes.strict)
    if system is None:
        file = demo_system(host.cards)
    elif isinstance(system, Path):
        file = read_system(system, host.cards)
    else:
        file = system(host.cards)
    outcome = analysis.compute(host, file.system, wishes.choices)
    if wishes.out is not None:
        result = Result(analysis.name, wishes.choices, file.text, outcome, current_versions())
        write_result(wishes.out, result, overwrite=wishes.overwrite)
    if wishes.picture is not None:
        draw_to(wishes.picture, analysis.name, outcome, file.system, host, wishes.choices, overwrite=wishes.overwrite)
    print_outcome(analysis, outcome, as_json=wishes.as_json, quiet=wishes.quiet, demo=system is None)
    if wishes.as_json or wishes.quiet:
        return
    if wishes.out is not None:
        click.echo(f"\nWritten to {wishes.out}; read it with: clockfall show {wishes.out}")
    if wishes.picture is not None:
        click.echo(f"\nDrawn to {wishes.picture}")
