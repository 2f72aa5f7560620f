"""Rigs whose devices are all cards, small enough for a sweep to end within a minute of real time.

Real ports cannot be paced, so the rig is: short and narrow lines, a small column, room temperature, two points.
"""

from __future__ import annotations

import re
import shutil
from collections.abc import Mapping
from importlib.resources import files
from pathlib import Path

from fakes.config_files import CONFIGS

MODBUS_DEVICES = {
    "pump-a": ("pump", 1), "pump-b": ("pump", 2), "valve-a": ("valve", 3), "valve-b": ("valve", 4),
    "valve-c": ("valve", 5), "chiller": ("chiller", 6), "sensors": ("sensor", 7),
}  # fmt: skip
RECIPE = """
schema = "rigd-recipe-1"
name = "short-sweep"
title = "Two flow rates at room temperature"
[sheet]
signed_by = "demonstration, nobody"
stagnation_safe = true
flush_volumes = 1
safe_temperature = "20 degC"
temperature_limit = "75 degC"
pressure_limit = "8 bar"
adiabatic_rise = "3 K"
gas_evolution = false
[conditioning]
total_flow = "8 mL/min"
temperature = "22 degC"
volumes = 1
min_time = "1 s"
max_time = "60 min"
band = "5 K"
steady_for = "1 s"
[switchover]
rinses = 0
stagger = true
total_flow = "8 mL/min"
[sweep]
temperature = "22 degC"
ratio = { PU-A = 1, PU-B = 1 }
total_flow = { from = "6 mL/min", to = "8 mL/min", count = 2, spacing = "geometric" }
order = "descending"
seed = 1
[settle]
volumes = 1.7
volumes_max = 3
signal = "TT-1"
tolerance = "5 K"
persistence = 1
window = 4
on_timeout = "collect"
[collect]
volume = "0.1 mL"
[flush]
total_flow = "8 mL/min"
volumes = 1
temperature = "22 degC"
[park]
temperature = "22 degC"
circulate = true
pressure_max = "8 bar"
"""


def small_rig() -> str:
    """The example rig without detector, second sensors, links and devices; an eighth as long."""
    text = (CONFIGS / "rigs/two-pump-column.toml").read_text(encoding="utf-8")
    text = text[: text.index("[[links]]")].replace('to = "IR"', 'to = "BPR"')
    gone = ("[[cells]]", 'id = "L-3"', 'tag = "PT-2"\ntitle', 'tag = "TT-2"\ntitle')
    text = "".join(one for one in re.split(r"(?m)^(?=\[)", text) if not any(word in one for word in gone))
    text = text.replace(', { tag = "PT-2", above = "8 bar" }', "").replace("1oo2", "1oo1").replace("TT-2", "TT-1")
    text = re.sub(r'length = "(\d+) mm"', lambda found: f'length = "{max(int(found[1]) // 8, 10)} mm"', text)
    for old, new in (
        ('bore = "6.6 mm"', 'bore = "3 mm"'),
        ('mass = "1.1 g"', 'mass = "0.03 g"'),
        ('refill_rate = "8 mL/min"', 'refill_rate = "60 mL/min"'),
        ('travel_time = "1 s"', 'travel_time = "0.3 s"'),
        ('bore = "1.0 mm"', 'bore = "0.5 mm"'),
    ):
        text = text.replace(old, new)
    return text


def without_syringes(text: str) -> str:
    """The same rig with pumps that draw all the time."""
    blocks = re.split(r"(?m)^(?=\[)", text)
    for at, block in enumerate(blocks):
        if block.startswith("[[pumps]]"):
            block = re.sub(r"(?m)^(?:bore|stroke_volume|refill_rate|dead_volume|force_limit) = .*\n", "", block)
            blocks[at] = block.replace("syringes = 2", 'syringes = 0\npressure_limit = "15 bar"')
    return "".join(blocks)


def _written(folder: Path, text: str) -> tuple[Path, Path]:
    shutil.copytree(CONFIGS / "chemistry", folder / "chemistry", dirs_exist_ok=True)
    rig, recipe = folder / "rigs/rig.toml", folder / "recipe.toml"
    rig.write_text(text, encoding="utf-8")
    recipe.write_text(RECIPE, encoding="utf-8")
    return rig, recipe


def _device(name: str, link: str, card: str, address: str, more: str = "") -> str:
    return (
        f'\n[[devices]]\nid = "{name}"\ndriver = "card"\nlink = "{link}"\naddress = "{address}"\nperiod = "500 ms"\n'
        f'options = {{ card = "{card}"{more} }}\n'
    )


def modbus_rig(folder: Path, port: int) -> tuple[Path, Path]:
    """Rig and recipe before ``fakes/modbus_rig.py``: the card templates, continuous pumps."""
    (folder / "rigs").mkdir(exist_ok=True)
    text = without_syringes(small_rig()) + f'[[links]]\nid = "bench"\nport = "socket://127.0.0.1:{port}"\n'
    for kind in ("pump", "valve", "chiller", "sensor"):
        name = f"modbus-{kind}.toml"
        card = files("rigd_drivers.card").joinpath("templates", name).read_text(encoding="utf-8")
        (folder / "rigs" / name).write_text(card, encoding="utf-8")
    for name, (kind, unit) in MODBUS_DEVICES.items():
        text += _device(name, "bench", f"modbus-{kind}.toml", str(unit))
    return _written(folder, text)


def manual_rig(folder: Path, ports: Mapping[str, int | str]) -> tuple[Path, Path]:
    """Rig and recipe before ``fakes/manual_bench.py``: the cards of configs/cards."""
    shutil.copytree(CONFIGS / "cards", folder / "rigs", dirs_exist_ok=True)
    text = small_rig()
    for link in ("pumps", "map"):
        text += f'[[links]]\nid = "{link}"\nport = "socket://127.0.0.1:{ports[link]}"\n'
    text += f'[[links]]\nid = "cooler"\nport = "{ports["chiller"]}"\nbaud = "4800 baud"\n'
    text += _device("pump-a", "pumps", "ascii-pump.toml", "07") + _device("pump-b", "pumps", "ascii-pump.toml", "08")
    for n, valve in enumerate("abc", 1):
        text += _device(f"valve-{valve}", "map", "map-valve.toml", "11", f", parameters = {{ n = {n} }}")
    text += _device("sensors", "map", "map-inputs.toml", "20") + _device("chiller", "cooler", "ascii-chiller.toml", "")
    return _written(folder, text)
