"""The account of a pump without syringes, as the daemon sees it through ``level`` and ``standby``."""

from __future__ import annotations

from rigd.model.orders import Action, Authority, Order
from rigd_drivers.card.account import Account


def order(action: Action, value: float = 0.0) -> Order:
    return Order(1, "u", action, value, Authority.SEQUENCE, "test", 0)


def polled(account: Account, delivered_mL: float) -> tuple[float, float]:
    account.drew(delivered_mL)
    return account.level_mL, account.standby_mL


def test_what_was_filled_is_shown_once_and_then_delivered_on_top_of_the_rest() -> None:
    account = Account(single=False, stroke_mL=10.0)
    polled(account, 100.0)
    assert account.takes(order(Action.FILL, 2.0))
    assert polled(account, 100.0) == (2.0, 0.0)  # nothing was left: it follows at once
    assert polled(account, 100.5) == (1.5, 0.0)
    account.takes(order(Action.FILL, 3.0))
    assert polled(account, 100.5) == (1.5, 3.0)
    assert polled(account, 101.0) == (4.0, 0.0)  # the change-over by itself that the daemon looks for
    assert polled(account, 110.0) == (0.0, 0.0)


def test_more_than_a_stroke_waits() -> None:
    account = Account(single=False, stroke_mL=5.0)
    for filled, seen in ((4.0, (4.0, 0.0)), (4.0, (4.0, 4.0))):
        account.takes(order(Action.FILL, filled))
        assert polled(account, 0.0) == seen
    assert polled(account, 0.0) == (5.0, 3.0)


def test_a_single_one_is_filled_and_other_orders_are_the_pumps() -> None:
    account = Account(single=True)
    assert account.takes(order(Action.FILL, 2.0))
    assert polled(account, 0.0) == (2.0, 0.0)
    assert not account.takes(order(Action.DELIVER, 1.0))
    assert not account.takes(order(Action.STOP))
