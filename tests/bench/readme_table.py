"""``make bench-readme``: puts the figures of a bench document, with machine and date, between the marks in README.md,
and the plot of cost against size beside its other pictures."""

from __future__ import annotations

import json
import sys
from collections.abc import Mapping
from pathlib import Path
from typing import Any

ROOT = Path(__file__).resolve().parents[2]
BEGIN, END = "<!-- bench: written by make bench-readme -->", "<!-- /bench -->"
PLOT = Path(".readme") / "growth.svg"
HEAD = "| what | value | floor, same run | ratio | to hold | |\n| --- | ---: | ---: | ---: | --- | --- |\n"
VERDICTS = {True: "held", False: "**missed**", None: ""}


def table(document: Mapping[str, Any]) -> str:
    """The figures as a Markdown table, with what they were measured on."""
    from bench.board import shown

    machine = document["machine"]
    about = (
        f"{machine['processor']}, {machine['cores']} cores, Python {machine['python']}, load at the end "
        f"{machine['load_1min']}; {document['began_utc'][:10]}, scale {document['scale']}."
    )
    rows = [_row(one, shown) for one in document["figures"]]
    return f"{about}\n\n{HEAD}{''.join(rows)}"


def _row(one: Mapping[str, Any], shown: Any) -> str:
    if one["value"] is None:
        return f"| {one['what']} | {one['note']} | | | | |\n"
    value = f"{shown(one['value'])} {one['unit']}".strip()
    floor = f"{shown(one['floor'])} ({one['floor_what']})" if one["floor"] is not None else ""
    ratio = f"{shown(one['ratio'])}×" if one["ratio"] is not None else ""
    return f"| {one['what']} | {value} | {floor} | {ratio} | {_target(one)} | {VERDICTS[one['held']]} |\n"


def _target(one: Mapping[str, Any]) -> str:
    from bench.figures import Target

    return Target(**one["target"]).words(one["unit"]).replace(" x", "×")


def put(text: str, content: str) -> str:
    """README with the content between its marks. ``ValueError`` when they are not there, once and in order."""
    before, found, rest = text.partition(BEGIN)
    _, ended, after = rest.partition(END)
    if not found or not ended or BEGIN in after or END in after:
        raise ValueError(f"README.md needs the marks {BEGIN} and {END}, each once")
    return f"{before}{BEGIN}\n{content}{END}{after}"


def main(bench: Path, root: Path = ROOT) -> None:
    """Rewrite README.md and the plot below ``root`` from a bench document."""
    from bench.growth_plot import write_growth_plot

    document = json.loads(bench.read_text(encoding="utf-8"))
    content = table(document)
    if write_growth_plot(document["figures"], root / PLOT):
        content += f"\n![Cost against size, with fitted exponents]({PLOT})\n"
    readme = root / "README.md"
    readme.write_text(put(readme.read_text(encoding="utf-8"), content), encoding="utf-8")


if __name__ == "__main__":
    sys.path[0] = str(Path(__file__).resolve().parents[1])
    main(Path(sys.argv[1] if len(sys.argv) > 1 else "bench.json"))
