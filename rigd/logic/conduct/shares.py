"""How a total flow is shared, and the doses of the solvent phases; used by the phases and by the plan alike."""

from __future__ import annotations

from collections.abc import Mapping

from rigd.logic.conduct.doses import Dose
from rigd.logic.conduct.layout import Layout, PumpLayout
from rigd.model.recipe import Flush, Prime


def solvent_flows(layout: Layout, total_mL_min: float) -> dict[str, float]:
    """Equal shares over the pumps that can draw solvent, inside each pump's range."""
    able = layout.solvent_pumps()
    share = total_mL_min / len(able) if able else 0.0
    return {name: in_range(layout.pumps[name], share) for name in able}


def reagent_flows(layout: Layout, shares: Mapping[str, float], total_mL_min: float) -> dict[str, float]:
    """A total shared as the flows of a point are."""
    whole = sum(shares.values())
    return {
        name: in_range(layout.pumps[name], total_mL_min * flow / whole)
        for name, flow in shares.items()
        if flow > 0 and name in layout.pumps
    }


def in_range(play: PumpLayout, flow_mL_min: float) -> float:
    """The nearest flow that the pump can deliver."""
    return min(max(flow_mL_min, play.pump.rate_min_mL_min), play.pump.rate_max_mL_min)


def through_mL(layout: Layout, play: PumpLayout) -> float:
    """Volume from feed valve to outlet valve that is this pump's to fill: its syringes and its share of the trunk."""
    syringes_mL = play.pump.dead_mL * play.pump.syringes
    trunk_mL = layout.trunk_mL / max(len(layout.solvent_pumps()), 1)
    return play.feed.inlet_mL + syringes_mL + play.feed.outlet_mL + trunk_mL


def prime_doses(layout: Layout, prime: Prime) -> dict[str, tuple[Dose, ...]]:
    """Solvent through everything; then the reagent's supply line is drawn full through the syringe, and washed out."""
    wash = prime.reagent_lines and not layout.recipe.solvent_only
    doses: dict[str, tuple[Dose, ...]] = {}
    for name in layout.solvent_pumps():
        play = layout.pumps[name]
        through = through_mL(layout, play)
        first = Dose(play.solvent, prime.volumes * (play.supply_mL.get(play.solvent, 0.0) + through))
        doses[name] = (first,)
        if wash and play.reagent:
            drawn_mL = prime.reagent_line_volumes * play.supply_mL.get(play.reagent, 0.0)
            line = Dose(f"{play.reagent}~line", drawn_mL)
            doses[name] = (first, line, *_rinses(play, play.solvent, 1), Dose(play.solvent, prime.volumes * through))
    return doses


def flush_doses(layout: Layout, flush: Flush) -> dict[str, tuple[Dose, ...]]:
    """Solvent through everything; each syringe is rinsed first, because the line from the valve still holds reagent."""
    doses: dict[str, tuple[Dose, ...]] = {}
    for name in layout.solvent_pumps():
        play = layout.pumps[name]
        rinses = _rinses(play, play.solvent, 1) if play.reagent and not layout.recipe.solvent_only else ()
        doses[name] = (*rinses, Dose(play.solvent, flush.volumes * through_mL(layout, play)))
    return doses


def rinse_doses(layout: Layout, rinses: int, reagent: bool, pumps: Mapping[str, float]) -> dict[str, tuple[Dose, ...]]:
    """Each syringe of each pump that changes its liquid, rinsed with the new one."""
    doses: dict[str, tuple[Dose, ...]] = {}
    for name in pumps:
        play = layout.pumps[name]
        if play.reagent and play.solvent:
            doses[name] = _rinses(play, play.reagent if reagent else play.solvent, rinses)
    return doses


def _rinses(play: PumpLayout, liquid: str, rinses: int) -> tuple[Dose, ...]:
    return tuple(Dose(f"{liquid}~{i + 1}", play.rinse_mL) for i in range(rinses * play.pump.syringes))
