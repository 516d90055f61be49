"""`runaudit draft`."""

from __future__ import annotations

from pathlib import Path

import click

from auditd.cli.output import message


@click.command(epilog="Example: runaudit draft results/ -o plan.toml")
@click.argument("landing", type=click.Path(path_type=Path))
@click.option(
    "-o", "--output", "output", type=click.Path(path_type=Path),
    help="Write the plan there, if there is none; else it is printed.",
)  # fmt: skip
def draft(landing: Path, output: Path | None) -> None:
    """Read what has landed and write a first plan. Its reasons stand in comments."""
    from auditd.pipeline.drafting import draft as make
    from auditd.pipeline.drafting import write_draft

    made = make(landing, Path.cwd() if output is None else output.parent)
    if output is None:
        click.echo(made.text, nl=False)
    else:
        write_draft(made.text, output)
        message(f"wrote {output}; answer what it marks with ASK, then: runaudit --plan {output} gather")
    took = f"read {made.n_records:,} records in {made.n_files:,} files"
    message(
        f"{took}; all would be taken"
        if not made.n_refused
        else f"{took}; {made.n_refused:,} would be refused: {made.reason}"
    )
