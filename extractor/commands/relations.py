"""``extractor relations``."""

from __future__ import annotations

import click

from extractor.commands import options
from extractor.quantities import DESIGNS, VOCABULARY

_QUANTITY = options.completing(VOCABULARY)


@click.command(
    context_settings=options.SETTINGS, short_help="List the relations between quantities, with sources."
)
@click.option(
    "--from", "source", shell_complete=_QUANTITY, metavar="Q", help="Relations that need this quantity."
)
@click.option(
    "--to", "target", shell_complete=_QUANTITY, metavar="Q", help="Relations that give this quantity."
)
@click.option(
    "--design",
    shell_complete=options.completing(DESIGNS),
    metavar="D",
    help="Relations that hold in this design.",
)
def command(source: str | None, target: str | None, design: str | None) -> None:
    """List the relations between quantities: formula, grade, designs and source of each.

    \b
    Examples:
      extractor relations
      extractor relations --to omega_squared
      extractor relations --from f_value --design two-group
    """
    asked = ((source, VOCABULARY, "quantity"), (target, VOCABULARY, "quantity"), (design, DESIGNS, "design"))
    for word, known, kind in asked:
        options.check_known(word, known, kind)
    from extractor.catalogue.relation import catalogue
    from extractor.output import listing, terminal

    found = [
        relation
        for relation in catalogue().values()
        if (source is None or source in relation.needs)
        and (target is None or target == relation.gives)
        and (design is None or design in relation.designs)
    ]
    listing.show_relations(terminal.console(), found)
