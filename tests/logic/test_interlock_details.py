"""Details of interlocks that only a close look shows: order of causes, defaults, times at their edges, notes."""

from __future__ import annotations

from fakes.rigs import S, program_of, two_pump_rig

from rigd.logic.protect.conditions import Channel, Conditions
from rigd.logic.protect.interlock_vote import vote
from rigd.model.orders import Stop
from rigd.model.protection import Condition, ConditionKind, Interlock

PAIR = Interlock(
    "PAIR",
    "two channels",
    (Condition(ConditionKind.HIGH, "PT-1", 8.0), Condition(ConditionKind.HIGH, "PT-2", 8.0)),
    Stop.CUT,
    witnesses=(Condition(ConditionKind.DISCREPANCY, "PT-1", 2.0, reference="PT-2"),),
    discord_ns=10 * S,
)
PROGRAM = program_of(two_pump_rig(interlocks=(PAIR,), alarms=()))


def channels(*first: Channel, **since_ns: int) -> Conditions:
    rest = [Channel.CLEAR] * (len(PROGRAM.watches) - len(first))
    return Conditions((*first, *rest), {int(index[1:]): at for index, at in since_ns.items()})


def test_the_oldest_cause_comes_first() -> None:
    both = channels(Channel.ACTIVE, Channel.ACTIVE, c0=20, c1=10)
    assert vote(PROGRAM, PAIR, both, running=True).causes == (1, 0)


def test_partners_that_disagree_count_only_once_they_did_so_for_too_long() -> None:
    apart = channels(Channel.CLEAR, Channel.CLEAR, Channel.ACTIVE)
    assert not vote(PROGRAM, PAIR, apart, running=True).demand
    assert vote(PROGRAM, PAIR, apart, running=True, discord=True).demand
