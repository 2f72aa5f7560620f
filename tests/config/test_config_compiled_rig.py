"""What the compiler makes of the example rig besides what is written: tags, channels, facts, built-in rules."""

from __future__ import annotations

from pathlib import Path

import pytest
from fakes.card_rigs import without_syringes
from fakes.config_files import CHEMISTRY, CONFIGS, RECIPE, RIG, edited, within, without, write

from rigd.config import load_pair, load_rig
from rigd.config.pressure_side import pressure_sides
from rigd.model.devices import PumpState
from rigd.model.orders import Stop
from rigd.model.protection import Armed, ConditionKind, OnBad, Priority
from rigd.model.rig import End, RigDefinition, TagKind

SECOND_NS = 1_000_000_000


@pytest.fixture(scope="module")
def rig() -> RigDefinition:
    return load_rig(CONFIGS / "rigs/two-pump-column.toml")


def test_quantities_arrive_in_house_units(rig: RigDefinition) -> None:
    pump, column, cell = rig.pumps[0], rig.columns[0], rig.cells[0]

    assert (pump.bore_mm, pump.stroke_mL, pump.rate_max_mL_min, pump.compliance_mL_bar) == (10.3, 5.0, 5.0, 0.01)
    assert (column.bore_mm, column.length_mm, column.packing.bead_diameter_mm) == (6.6, 100.0, 0.2)
    assert (column.packing.swell_s, column.packing.compressibility_per_bar) == (300.0, 0.004)
    assert (cell.volume_mL, cell.path_um, cell.period_ns) == (0.04, 25.0, 5 * SECOND_NS)
    assert rig.tees[0].volume_mL == pytest.approx(0.004)
    assert (rig.scan_ns, rig.flush_mL_min) == (SECOND_NS // 10, 2.0)
    assert rig.vessels[0].capacity_mL == 1000.0
    assert rig.lines[0].end == End("V-A", "solvent")
    reaction = rig.chemistry.reactions[0]
    assert reaction.rate_constant == 0.001625
    assert reaction.deactivation_per_h == pytest.approx(0.005)
    assert rig.chemistry.species_by_id()["water"].bands[0].absorptivity == 22.0


def test_every_unit_tells_its_channels(rig: RigDefinition) -> None:
    ids = {tag.id for tag in rig.tags}

    assert {f"PU-A.{channel}" for channel in ("flow", "level", "standby", "delivered", "state")} <= ids
    assert {"V-C.position", "CH.bath", "CH.setpoint", "CH.circulating"} <= ids
    assert {"IR.ethanol", "IR.acetic acid", "IR.ethyl acetate", "IR.water", "IR.conversion", "IR.residual"} <= ids
    assert {f"{vessel.id}.volume" for vessel in rig.vessels} <= ids
    assert len(ids) == len(rig.tags)
    assert rig.tag("V-C.position").labels == ("waste", "collect", "shut")
    assert rig.tag("V-C.position").low == -2.0
    assert rig.tag("PU-A.state").labels[PumpState.STALLED] == "stalled"
    assert (rig.tag("IR.conversion").kind, rig.tag("IR.conversion").unit) == (TagKind.DERIVED, "1")
    assert rig.tag("IR.water").unit == "mol/L"
    assert (rig.tag("flask.volume").device, rig.tag("flask.volume").unit) == ("", "mL")


def test_periods_and_ages_are_the_sensors_or_the_devices(rig: RigDefinition) -> None:
    assert (rig.tag("PT-1").period_ns, rig.tag("PT-1").stale_ns) == (SECOND_NS // 5, SECOND_NS)
    assert (rig.tag("CH.bath").period_ns, rig.tag("CH.bath").stale_ns) == (2 * SECOND_NS, 10 * SECOND_NS)
    assert rig.tag("IR.conversion").period_ns == 5 * SECOND_NS


def test_an_age_of_a_device_holds_for_its_channels(tmp_path: Path) -> None:
    rig = edited(RIG, *within("pump-a", 'period = "1 s"', 'period = "500 ms"\nstale_after = "2 s"'))
    tag = load_rig(write(tmp_path, rig)[0]).tag("PU-A.flow")

    assert (tag.period_ns, tag.stale_ns) == (SECOND_NS // 2, 2 * SECOND_NS)


def test_devices_read_what_their_tags_need(rig: RigDefinition) -> None:
    devices = {device.id: device for device in rig.devices}

    assert devices["pump-a"].unit == "PU-A"
    assert [channel.channel for channel in devices["pump-a"].channels] == [
        "flow", "level", "standby", "delivered", "state",
    ]  # fmt: skip
    first = devices["sensors"].channels[0]
    assert (first.channel, first.tag, first.period_ns) == ("p1", "PT-1", SECOND_NS // 5)
    assert devices["sensors"].unit == ""
    assert devices["ir"].channels == ()
    read = [channel.tag for device in rig.devices for channel in device.channels]
    assert sorted(read) == sorted(tag.id for tag in rig.tags if tag.kind is not TagKind.DERIVED)


def test_drivers_get_the_facts_about_their_unit(rig: RigDefinition) -> None:
    facts = {device.id: device.facts for device in rig.devices}

    assert facts["pump-a"] == {
        "syringes": 2, "bore_mm": 10.3, "stroke_mL": 5.0, "dead_mL": 0.02, "continuous": False,
        "force_limit_N": 130.0,
        "rate_min_mL_min": 0.005, "rate_max_mL_min": 5.0, "refill_rate_mL_min": 8.0, "retries": 2,
    }  # fmt: skip
    assert facts["valve-c"] == {
        "positions": ("waste", "collect", "shut"), "rest": "waste", "travel_s": 1.0, "retries": 2,
    }  # fmt: skip
    assert facts["chiller"] == {"low_degC": -10.0, "high_degC": 95.0, "safe_degC": 20.0, "retries": 2}
    assert facts["ir"] == {"path_um": 25.0, "period_s": 5.0, "retries": 2}
    assert facts["sensors"]["spans"] == {
        "p1": (0.0, 25.0), "p2": (0.0, 25.0), "t1": (-50.0, 150.0), "t2": (-50.0, 150.0),
    }  # fmt: skip


def test_interlocks_as_written(rig: RigDefinition) -> None:
    locks = {lock.id: lock for lock in rig.interlocks}
    pressure, jacket = locks["PRESSURE-HIGH"], locks["JACKET-ADRIFT"]

    assert (pressure.architecture, pressure.on_bad, pressure.stop) == ("1oo2", OnBad.TRIP, Stop.CUT)
    assert [(c.kind, c.tag, c.limit) for c in pressure.causes] == [
        (ConditionKind.HIGH, "PT-1", 8.0), (ConditionKind.HIGH, "PT-2", 8.0),
    ]  # fmt: skip
    assert (pressure.on_delay_ns, pressure.clear_delay_ns, pressure.rating) == (SECOND_NS // 5, SECOND_NS, 20.0)
    assert not pressure.built_in
    (drift,) = jacket.causes
    assert (drift.kind, drift.tag, drift.reference, drift.limit) == (
        ConditionKind.DEVIATION,
        "TT-2",
        "CH.setpoint",
        6.0,
    )
    assert drift.settling_ns == 1200 * SECOND_NS
    assert jacket.armed is Armed.RUNNING


def test_slopes_and_states_become_numbers(tmp_path: Path) -> None:
    rig = edited(
        RIG,
        *within("BED-HOT", 'above = "75 degC"', 'rate_above = "30 K/min", deadband = "2 K"'),
        *within(
            "FLASK-NEARLY-FULL",
            '"flask.volume", above = "225 mL", deadband = "5 mL"',
            '"V-C.position", equals = "shut"',
        ),
    )
    made = load_rig(write(tmp_path, rig)[0])
    slope = next(lock for lock in made.interlocks if lock.id == "BED-HOT").causes[0]
    state = next(alarm for alarm in made.alarms if alarm.id == "FLASK-NEARLY-FULL").condition

    assert (slope.kind, slope.limit, slope.window_ns) == (ConditionKind.RATE, pytest.approx(0.5), 20 * SECOND_NS)
    assert (state.kind, state.limit) == (ConditionKind.EQUALS, 2.0)


def test_alarms_as_written(rig: RigDefinition) -> None:
    rising = rig.alarms[0]

    assert (rising.priority, rising.condition.limit, rising.condition.deadband) == (Priority.HIGH, 6.5, 0.4)
    assert (rising.on_delay_ns, rising.off_delay_ns) == (SECOND_NS, 15 * SECOND_NS)


@pytest.mark.parametrize(
    ("stated", "priority"),
    [
        ('leads_to = "lost protection"', Priority.HIGHEST),
        ('leads_to = "trip"\nrespond_within = "29 min"', Priority.HIGH),
        ('leads_to = "trip"\nrespond_within = "30 min"', Priority.MEDIUM),
        ('leads_to = "lost run"', Priority.MEDIUM),
        ('leads_to = "maintenance"', Priority.LOW),
    ],
)
def test_the_priority_follows_from_consequence_and_time(stated: str, priority: Priority, tmp_path: Path) -> None:
    made = load_rig(write(tmp_path, edited(RIG, ('priority = "high"', stated)))[0])
    assert made.alarms[0].priority is priority


def test_built_in_rules_cover_links_power_stalls_valves_and_faults(rig: RigDefinition) -> None:
    built = {lock.id: lock for lock in rig.interlocks if lock.built_in}
    devices = {device.id for device in rig.devices}

    assert {lock.partition("-")[2] for lock in built if lock.startswith("POWER-")} == devices
    assert {lock.partition("-")[2] for lock in built if lock.startswith("LINK-")} == devices - {"ir"}
    assert built["LINK-sensors"].stop is Stop.CUT
    assert (built["LINK-chiller"].stop, built["LINK-chiller"].on_delay_ns) == (Stop.QUENCH, 10 * SECOND_NS)
    assert built["STALL-PU-B"].causes[0].limit == PumpState.STALLED
    assert (built["MISMATCH-V-C"].causes[0].kind, built["MISMATCH-V-C"].causes[0].tag) == (
        ConditionKind.MISMATCH, "V-C.position",
    )  # fmt: skip
    faults = {lock.causes[0].tag: lock for lock in built.values() if lock.causes[0].kind is ConditionKind.FAULT}
    assert {name: lock.stop for name, lock in faults.items()} == {
        "conduct": Stop.CUT, "scan": Stop.CUT, "suspend": Stop.CUT, "guard": Stop.CUT, "journal": Stop.QUENCH,
        "STOP-REQUEST": Stop.QUENCH, "CUT-REQUEST": Stop.CUT,
    }  # fmt: skip
    assert faults["journal"].on_delay_ns == 5 * SECOND_NS
    for lock in built.values():
        assert len(lock.response) > 20
        assert len(lock.consequence) > 20
        assert lock.basis


def test_an_empty_pump_is_an_alarm_that_holds(rig: RigDefinition) -> None:
    empty = next(alarm for alarm in rig.alarms if alarm.id == "EMPTY-PU-A")

    assert empty.hold
    assert empty.action
    assert (empty.condition.tag, empty.condition.limit) == ("PU-A.state", PumpState.EMPTY)


def test_a_valve_turned_by_hand_has_no_feedback(tmp_path: Path) -> None:
    rig = edited(RIG, *within("V-C", 'device = "valve-c"\n', ""), *without("valve-c"))
    made = load_rig(write(tmp_path, rig)[0])

    assert "V-C.position" not in {tag.id for tag in made.tags}
    assert "MISMATCH-V-C" not in {lock.id for lock in made.interlocks}


def test_a_link_without_interlocked_tags_may_be_lost(tmp_path: Path) -> None:
    rig = edited(RIG, *without("PRESSURE-HIGH", "BED-HOT", "JACKET-ADRIFT"))
    made = load_rig(write(tmp_path, rig)[0])

    assert "LINK-sensors" not in {lock.id for lock in made.interlocks}
    assert "LINK-chiller" in {lock.id for lock in made.interlocks}


def test_the_link_of_a_cell_counts_when_an_interlock_looks_at_it(tmp_path: Path) -> None:
    rig = edited(RIG, *within("BED-HOT", '"TT-1", above = "75 degC"', '"IR.acetic acid", above = "1.5 mol/L"'))

    assert "LINK-ir" in {lock.id for lock in load_rig(write(tmp_path, rig)[0]).interlocks}


def test_the_weakest_part_is_sought_behind_the_pumps_only(tmp_path: Path) -> None:
    """A weak suction line does not count, a weak line to the flask does."""
    weak_suction = edited(RIG, *within("L-A2", 'rating = "20 bar"', 'rating = "2 bar"'))
    weak_outlet = edited(RIG, *within("L-5", 'rating = "70 bar"', 'rating = "9 bar"'))

    assert load_rig(write(tmp_path, weak_suction)[0]).tag("PT-1").rating == 20.0
    made = load_rig(write(tmp_path, weak_outlet)[0])
    assert made.tag("PT-2").rating == 9.0
    assert [(side.weakest, side.rating_bar) for side in pressure_sides(made)] == [("L-5", 9.0)]


def test_outside_and_simulation(tmp_path: Path) -> None:
    outside = """[outside.mqtt]
host = "broker.local"
keepalive = "30 s"

[[outside.alerts]]
name = "phone"
url = "https://hook.local/x"
priority_at_least = "medium"

[simulation]"""
    made = load_rig(write(tmp_path, edited(RIG, ("[simulation]", outside)))[0])

    assert made.outside.mqtt is not None
    assert (made.outside.mqtt.host, made.outside.mqtt.port, made.outside.mqtt.keepalive_s) == ("broker.local", 1883, 30)
    assert made.outside.channels[0].priority_at_least == Priority.MEDIUM
    assert made.simulation.truth == {"COL.voidage": 0.385, "PU-A.compliance_mL_bar": 0.012}


def test_the_recipe_as_written() -> None:
    pair = load_pair(CONFIGS / "rigs/two-pump-column.toml", CONFIGS / "recipes/overnight-sweep.toml")
    recipe = pair.recipe
    assert recipe is not None
    assert recipe.sheet is not None
    assert recipe.leak_test is not None
    assert recipe.permit is not None

    assert (recipe.settle.tolerance, recipe.settle.signal) == (pytest.approx(0.01), "IR.conversion")
    assert (recipe.sheet.limit_bar, recipe.sheet.limit_degC, recipe.sheet.freezes_below_degC) == (8.0, 75.0, -273.15)
    assert (recipe.leak_test.fill_s_max, recipe.leak_test.shut_position) == (180.0, "shut")
    assert recipe.permit.end_utc == "2035-01-01T06:00:00Z"
    assert [item.id for item in recipe.checklist] == ["bed", "outlet", "vent"]
    assert not recipe.solvent_only


def test_a_pump_without_syringes_needs_none_of_their_sizes(tmp_path: Path) -> None:
    path, _ = write(tmp_path, without_syringes(RIG), RECIPE, CHEMISTRY)
    pump = load_rig(path).pumps[0]
    assert pump.continuous
    assert (pump.syringes, pump.stroke_mL) == (2, 25.0)  # as it is planned: five minutes of its largest rate
    assert pump.stall_bar == pytest.approx(15.0)


def test_a_balance_is_a_sensor_of_mass(tmp_path: Path) -> None:
    balance = (
        '[[sensors]]\ntag = "WT-1"\ntitle = "balance below the flask"\nmeasures = "mass"\nat = "flask"\n'
        'span = ["0 g", "2 kg"]\ndevice = "sensors"\nchannel = "w1"\n\n[[interlocks]]'
    )
    path, _ = write(tmp_path, RIG.replace("[[interlocks]]", balance, 1), RECIPE, CHEMISTRY)
    tag = load_rig(path).tag("WT-1")
    assert (tag.unit, tag.low, tag.high) == ("g", 0.0, 2000.0)
