"""``rigd schema``: the JSON Schemas of the files that people write."""

from __future__ import annotations

import click

from rigd.console.output import Output, json_option

KINDS = ("rig", "recipe", "chemistry", "nights", "card")


@click.command()
@click.argument("kind", type=click.Choice(KINDS))
@json_option
@click.pass_obj
def schema(output: Output, kind: str) -> None:
    """Print the JSON Schema of a rig, recipe, chemistry, nights or card file; editors complete and check with it."""
    from rigd.config import schema as schemas

    output.json = True
    if kind == "card":
        from rigd.adapters.plugins import driver_family

        output.document(schemas.published(driver_family("card").options_schema("card file"), "protocol card"))
        return
    output.document(getattr(schemas, f"{kind}_schema")())
