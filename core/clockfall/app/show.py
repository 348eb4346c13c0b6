"""`clockfall show`: read a result file."""

from __future__ import annotations

from pathlib import Path

import click

from clockfall.app.analyses import Block, analysis
from clockfall.app.printing import print_blocks, print_outcome
from clockfall.files.results import Result, read_result


@click.command("show")
@click.argument("result", type=click.Path(path_type=Path))
@click.option("--json", "as_json", is_flag=True, help="Print the JSON that the analysis itself would print.")
@click.option("--system", "system_text", is_flag=True, help="Print the system file that the result was computed from.")
@click.option("--quiet", "-q", is_flag=True, help="Print the main number alone.")
@click.option("--debug", is_flag=True, help="Show the traceback of an error.")
def command(result: Path, *, as_json: bool, system_text: bool, quiet: bool, debug: bool) -> None:
    """Print what the file RESULT holds, as the analysis printed it, and where it comes from."""
    del debug  # read by clockfall.app.main before any option is parsed
    found = read_result(result)
    if system_text:
        click.echo(found.system_text, nl=False)
        return
    print_outcome(analysis(found.command), found.outcome, as_json=as_json, quiet=quiet)
    if not (as_json or quiet):
        click.echo()
        print_blocks("Where it comes from", [_provenance(found)])


def _provenance(result: Result) -> Block:
    choices = result.choices
    rows = [
        ("computed by", ", ".join(f"{name} {number}" for name, number in result.versions.items())),
        ("system file", f"SHA-256 {result.system_sha256[:16]}..., print it with --system"),
        ("effects used", ", ".join(f"{e.name} ({e.distribution} {e.version})" for e in result.outcome.used) or "none"),
    ]
    for name in ("only", "without", "use"):
        value = getattr(choices, name)
        if value:
            rows.append((f"--{name}", ", ".join(value)))
    return Block(tuple(rows))
