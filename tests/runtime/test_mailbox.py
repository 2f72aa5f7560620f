"""The two lanes: what overtakes, what is made void, what never is."""

from __future__ import annotations

from hypothesis import given
from hypothesis import strategies as st

from rigd.model.orders import Action, Authority, Order
from rigd.runtime.mailbox import Mailbox, is_trip


def order(number: int, unit: str, action: Action, authority: Authority = Authority.SEQUENCE) -> Order:
    return Order(number, unit, action, 1.0, authority, "test", 0)


def drain(mailbox: Mailbox) -> list[int]:
    taken = []
    while one := mailbox.take_trip() or mailbox.take_normal():
        taken.append(one.number)
    return taken


def test_a_trip_overtakes_and_its_stops_go_first() -> None:
    mailbox = Mailbox()
    mailbox.post(order(1, "V-A", Action.MOVE))
    mailbox.post(order(2, "V-B", Action.MOVE, Authority.CUT))
    mailbox.post(order(3, "PU-A", Action.STOP, Authority.CUT))
    mailbox.post(order(4, "PU-B", Action.STOP, Authority.CUT))
    assert drain(mailbox) == [3, 4, 2, 1]


def test_a_stop_makes_everything_of_its_unit_void_but_nothing_of_another() -> None:
    mailbox = Mailbox()
    mailbox.post(order(1, "PU-A", Action.FILL))
    mailbox.post(order(2, "PU-A", Action.DELIVER))
    mailbox.post(order(3, "PU-B", Action.DELIVER))
    assert [void.number for void in mailbox.post(order(4, "PU-A", Action.STOP))] == [1, 2]
    assert drain(mailbox) == [4, 3]


def test_the_newest_of_a_kind_wins() -> None:
    mailbox = Mailbox()
    mailbox.post(order(1, "PU-A", Action.DELIVER))
    assert [void.number for void in mailbox.post(order(2, "PU-A", Action.DELIVER))] == [1]
    assert mailbox.post(order(3, "PU-A", Action.FILL)) == []
    assert drain(mailbox) == [2, 3]


def test_a_normal_order_never_removes_a_waiting_stop() -> None:
    mailbox = Mailbox()
    mailbox.post(order(1, "PU-A", Action.STOP))
    assert mailbox.post(order(2, "PU-A", Action.DELIVER)) == []
    assert drain(mailbox) == [1, 2]


def test_an_interrupted_order_comes_back_unless_something_newer_or_a_stop_waits() -> None:
    mailbox = Mailbox()
    first = order(1, "PU-A", Action.DELIVER)
    mailbox.post(order(2, "PU-B", Action.DELIVER))
    assert mailbox.put_back(first)
    assert drain(mailbox) == [1, 2]
    mailbox.post(order(3, "PU-A", Action.DELIVER))
    assert not mailbox.put_back(first)
    drain(mailbox)
    mailbox.post(order(4, "PU-A", Action.STOP))
    assert not mailbox.put_back(order(5, "PU-A", Action.FILL))


ORDERS = st.lists(
    st.tuples(
        st.sampled_from(["PU-A", "PU-B", "V-A"]), st.sampled_from(list(Action)), st.sampled_from(list(Authority))
    ),
    max_size=30,
)


@given(ORDERS)
def test_every_order_ends_exactly_once_and_trips_before_others(wanted: list[tuple[str, Action, Authority]]) -> None:
    mailbox, void = Mailbox(), []
    posted = [order(number, *one) for number, one in enumerate(wanted)]
    for one in posted:
        void += mailbox.post(one)
    left = []
    while one_left := mailbox.take_trip() or mailbox.take_normal():
        left.append(one_left)
    assert sorted(o.number for o in void + left) == [o.number for o in posted]
    flags = [is_trip(o) for o in left]
    assert flags == sorted(flags, reverse=True)
    for unit in ("PU-A", "PU-B"):
        stops = [o.number for o in posted if o.unit == unit and o.action is Action.STOP]
        if stops:  # what was there before the last stop never leaves after it, except newer trips
            after = [o for o in left if o.unit == unit and o.number < stops[-1]]
            assert all(is_trip(o) for o in after)
