"""drivers/CARDS.md says the truth: its card is right and as the template, and every key of a card is in it."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterator
from importlib.resources import files
from pathlib import Path

from pydantic import BaseModel

from rigd.model.devices import DeviceSpec
from rigd_drivers.card import FAMILY, model
from rigd_drivers.card.expressions import FUNCTIONS

GUIDE = (Path(__file__).parents[2] / "drivers/CARDS.md").read_text(encoding="utf-8")


def test_its_card_is_right_and_that_of_the_template(tmp_path: Path) -> None:
    text = re.findall(r"```toml\n(.*?)```", GUIDE, re.DOTALL)[0]
    (tmp_path / "p.toml").write_text(text, encoding="utf-8")
    FAMILY.make(DeviceSpec("p", "card", "", "b", "07", "u", (), options={"card": str(tmp_path / "p.toml")}))
    template = files("rigd_drivers.card").joinpath("templates", "text-pump.toml").read_text(encoding="utf-8")
    ours, theirs = tomllib.loads(text), tomllib.loads(template)
    assert ours["questions"] == theirs["questions"]
    assert ours["orders"] == theirs["orders"]


def keys() -> Iterator[str]:
    for table in vars(model).values():
        if isinstance(table, type) and issubclass(table, BaseModel) and table.__module__ == model.__name__:
            yield from (field.alias or name for name, field in table.model_fields.items())


def test_every_key_and_function_is_in_it() -> None:
    assert not [name for name in {*keys(), *FUNCTIONS} if not re.search(rf"\b{name}\b", GUIDE)]
