"""stillbench selfcheck: the published cases, computed here."""

import click


@click.command(name="selfcheck")
def command() -> int:
    """Compute published cases on this machine: case, source, published, computed, digits matched.

    Exit code 0 when every printed digit is reproduced, 1 otherwise.
    """
    from stillbench.cli.print_result import table  # noqa: PLC0415  --help must not wait for the numbers
    from stillbench.selfcheck.run import run, summary  # noqa: PLC0415

    outcomes = run()
    rows = [
        [
            o.case.name,
            o.case.source,
            o.case.printed,
            o.computed,
            f"{o.matched} of {o.digits}",
            "" if o.agrees else "DIFFERS",
        ]
        for o in outcomes
    ]
    click.echo(table(["case", "source", "published", "computed", "digits", ""], rows))
    click.echo(summary(outcomes))
    return 0 if all(outcome.agrees for outcome in outcomes) else 1
