"""`roadhem shelf`."""

from __future__ import annotations

import json

import click

from roadhem.cli.options import json_option, print_json


@click.group
def shelf() -> None:
    """List the models and show what each one is.

    \b
    Example:
      roadhem shelf list
    """


@shelf.command("list")
@json_option
def list_(as_json: bool) -> None:
    """List the models on the shelf.

    \b
    Example:
      roadhem shelf list --json
    """
    from roadhem.state import shelf as models_on_shelf

    models = models_on_shelf()
    if as_json:
        rows = [{"name": m.name, "shipped": m.shipped, "folder": str(m.folder)} for m in models]
        print_json({"models": rows})
        return
    if not models:
        click.echo("the shelf is empty")
    for model in models:
        click.echo(f"{model.name}  {'shipped' if model.shipped else 'own'}  {model.folder}")


@shelf.command
@click.argument("name")
@json_option
def show(name: str, as_json: bool) -> None:
    """Show a model's card.

    \b
    Example:
      roadhem shelf show default
    """
    from roadhem.state import CARD, find_model

    card = json.loads((find_model(name) / CARD).read_text(encoding="utf-8"))
    if as_json:
        print_json(card)
        return
    width = max(len(key) for key in card)
    for key, value in card.items():
        shown = value if isinstance(value, str) else json.dumps(value, ensure_ascii=False)
        click.echo(f"{key:<{width}}  {shown}")
