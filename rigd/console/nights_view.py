"""A campaign of nights as a terminal table, as the page's facts, and as JSON."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

from rigd.nights.summary import Campaign, Result, strongest

if TYPE_CHECKING:
    from rich.table import Table

SHARE_WORDS = {
    False: (
        "Spearman rank correlation",
        "+1: both always rise together, -1: one rises as the other falls, 0: no order.",
    ),
    True: (
        "total share of variance",
        "The part of a result's variance that goes when this number is known, alone or together with others.",
    ),
}


def told(campaign: Campaign) -> dict[str, Any]:
    """What the page and ``--json`` say."""
    sobol = any(not math.isnan(one.total) for result in campaign.results for one in result.influences)
    words, note = SHARE_WORDS[sobol]
    lead = f"{campaign.nights} of {campaign.planned} nights rehearsed, {campaign.design} design"
    ends = [*campaign.outcomes, *((f"first-out {name}", count) for name, count in campaign.first_outs)]
    ends += [(f"refused: {text}", count) for text, count in campaign.refusals[:5]]
    return {
        "name": campaign.name,
        "lead": f"{lead}, {len(campaign.varied)} numbers varied",
        "chance": chance_words(campaign),
        "finishes": _chance(campaign),
        "ends": ends,
        "results": [_result(result, sobol) for result in campaign.results],
        "varied": list(campaign.varied),
        "strongest": [{"result": r.words, "what": one.what} for r, one in strongest(campaign)],
        "share_words": words,
        "share_note": note,
        "wall_s_per_night": campaign.wall_s,
    }  # fmt: skip


def chance_words(campaign: Campaign) -> str:
    """The chance that a night finishes, with its interval."""
    if campaign.finishes is None:
        return "No night is finished yet."
    one = campaign.finishes
    return (
        f"{one.hits} of {one.nights} nights finish with all points collected: "
        f"{100 * one.hits / one.nights:.0f} % (95 % interval {100 * one.low:.0f} to {100 * one.high:.0f} %)"
    )


def _chance(campaign: Campaign) -> dict[str, float] | None:
    one = campaign.finishes
    return None if one is None else {"hits": one.hits, "nights": one.nights, "low": one.low, "high": one.high}


def _result(result: Result, sobol: bool) -> dict[str, Any]:
    scale = 100.0 if result.unit == "%" else 1.0
    seen = result.spread
    values = [scale * x for x in (seen.low, seen.p05, seen.median, seen.p95, seen.high)]
    influences = [
        {"what": one.what, "share": one.total if sobol else one.rank, "p": one.p} for one in result.influences
    ]
    return {
        "column": result.column,
        "words": result.words,
        "unit": result.unit,
        "nights": seen.number,
        "values": values,
        "numbers": [f"{value:.4g}" for value in values],
        "influences": influences,
        "most": _most(influences, sobol),
    }  # fmt: skip


def _most(influences: Sequence[Mapping[str, Any]], sobol: bool) -> str:
    if not influences:
        return ""
    first = influences[0]
    if not (first["share"] >= 0.1 if sobol else first["p"] < 0.01):
        return "nothing clearly"
    return f"{first['what']} ({first['share']:+.2f})"


def table(facts: Mapping[str, Any]) -> Table:
    """The spread of each result and what matters most."""
    from rich import box
    from rich.markup import escape
    from rich.table import Table

    made = Table(box=box.SIMPLE_HEAD, pad_edge=False)
    made.add_column("result")
    for heading in ("smallest", "5 %", "median", "95 %", "largest"):
        made.add_column(heading, justify="right")
    made.add_column("matters most", overflow="fold", style="dim")
    for result in facts["results"]:
        if not result["column"].startswith("settle_s."):
            made.add_row(f"{result['words']} / {result['unit']}", *result["numbers"], escape(result["most"]))
    return made
