"""Alarms: the table of states, the delays and the dead band."""

import itertools

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from eastfall.physics.alarms import BETWEEN, BEYOND, INSIDE, TRANSITIONS, Alarm, Rule, against_limit
from eastfall.physics.errors import ParameterError

STATES = ("normal", "active", "acknowledged", "returned", "latched", "shelved")
EVENTS = ("raise", "return", "acknowledge", "shelve", "expire")

# Written down from the definitions of IEC 62682:2022 (from memory, unconfirmed): what a person expects of each pair.
EXPECTED = {
    ("normal", "raise"): "active",
    ("normal", "shelve"): "shelved",
    ("active", "return"): "returned",
    ("active", "acknowledge"): "acknowledged",
    ("active", "shelve"): "shelved",
    ("acknowledged", "return"): "normal",
    ("acknowledged", "shelve"): "shelved",
    ("returned", "raise"): "active",
    ("returned", "acknowledge"): "normal",
    ("returned", "shelve"): "shelved",
    ("latched", "raise"): "active",
    ("latched", "acknowledge"): "normal",
    ("latched", "shelve"): "shelved",
    ("shelved", "expire"): "normal",
}


@pytest.mark.parametrize(("state", "event"), list(itertools.product(STATES, EVENTS)))
def test_every_pair_of_state_and_event_leads_where_the_definition_says(state, event):
    """A pair in the definition leads to its state, and any other pair changes nothing."""
    assert TRANSITIONS.get((state, event), state) == EXPECTED.get((state, event), state)


def changes(alarm, time, placed):
    """Feed samples and give the transitions as tuples."""
    out = alarm.sample(np.asarray(time, float), np.asarray(placed, np.int8))
    return [(one.time, one.old, one.new) for one in out]


def test_a_value_must_stay_beyond_for_the_whole_on_delay():
    """Beyond for 2.9 s of a 3 s delay raises nothing; the next stay of 3 s raises at its third second."""
    alarm = Alarm(Rule(name="x", on_delay=3.0))
    assert changes(alarm, [0.0, 1.0, 3.9], [INSIDE, BEYOND, INSIDE]) == []
    assert changes(alarm, [10.0, 12.0, 14.0], [BEYOND, BEYOND, BEYOND]) == [(13.0, "normal", "active")]


def test_the_dead_band_neither_raises_nor_returns():
    """A value in the dead band keeps an alarm as it was, and breaks off an on-delay that runs."""
    alarm = Alarm(Rule(name="x", on_delay=1.0))
    assert changes(alarm, [0.0, 0.5, 5.0], [BEYOND, BETWEEN, BETWEEN]) == []
    assert changes(alarm, [6.0, 8.0], [BEYOND, BETWEEN]) == [(7.0, "normal", "active")]
    assert changes(alarm, [9.0, 99.0], [BETWEEN, BETWEEN]) == []
    assert changes(alarm, [100.0], [INSIDE]) == [(100.0, "active", "returned")]


def test_a_value_on_its_limit_does_not_chatter():
    """Noise of half the dead band about the limit raises one alarm, and not a second one."""
    rng = np.random.default_rng(5)
    value = 15.0 + rng.uniform(-1.0, 1.0, 20_000)
    alarm = Alarm(Rule(name="x"))
    found = changes(alarm, np.arange(20_000) * 0.02, against_limit(value, 15.0, 2.0))
    assert [new for _, _, new in found] == ["active"]


def test_acknowledged_then_returned_is_normal_and_the_other_way_round_too():
    """Acknowledging and returning in either order end in normal, through different states."""
    one = Alarm(Rule(name="x"))
    assert changes(one, [1.0], [BEYOND]) == [(1.0, "normal", "active")]
    assert one.acknowledge(2.0)[0].new == "acknowledged"
    assert changes(one, [3.0], [INSIDE]) == [(3.0, "acknowledged", "normal")]
    other = Alarm(Rule(name="x"))
    changes(other, [1.0, 3.0], [BEYOND, INSIDE])
    assert other.state == "returned"
    assert other.acknowledge(4.0)[0].new == "normal"


def test_a_latching_alarm_waits_for_a_person_even_if_acknowledged_before():
    """After its condition has gone a latching alarm is latched until it is acknowledged again."""
    alarm = Alarm(Rule(name="x", latching=True))
    changes(alarm, [1.0], [BEYOND])
    alarm.acknowledge(2.0)
    assert changes(alarm, [3.0], [INSIDE]) == [(3.0, "acknowledged", "latched")]
    assert alarm.acknowledge(4.0)[0].new == "normal"


def test_a_shelved_alarm_comes_back_when_its_time_is_up_if_the_condition_stands():
    """Shelved for 60 s with the condition standing: raised anew at the 60th second, not before."""
    alarm = Alarm(Rule(name="x"))
    changes(alarm, [0.0], [BEYOND])
    assert alarm.shelve(10.0, 60.0)[0].new == "shelved"
    assert alarm.tick(69.9) == []
    assert [(one.time, one.new) for one in alarm.tick(100.0)] == [(70.0, "normal"), (70.0, "active")]


def test_a_shelved_alarm_stays_quiet_afterwards_if_the_condition_has_gone():
    """Shelved, and the condition goes meanwhile: normal when the time is up."""
    alarm = Alarm(Rule(name="x"))
    changes(alarm, [0.0], [BEYOND])
    alarm.shelve(10.0, 60.0)
    assert changes(alarm, [20.0], [INSIDE]) == []
    assert [one.new for one in alarm.tick(70.0)] == ["normal"]


def test_a_missing_value_neither_raises_nor_returns():
    """NaN against a limit is in between."""
    assert against_limit(np.array([np.nan]), 1.0, 0.1).tolist() == [BETWEEN]


@pytest.mark.parametrize("bad", [-1.0, float("nan"), float("inf")])
def test_a_bad_delay_is_refused_with_its_name(bad):
    """Delays are zero or more seconds."""
    with pytest.raises(ParameterError, match="on_delay"):
        Rule(name="x", on_delay=bad)


@pytest.mark.invariant
@given(
    steps=st.lists(
        st.tuples(st.floats(0.0, 4.0), st.sampled_from([BEYOND, BETWEEN, INSIDE])), min_size=1, max_size=40
    ),
    cuts=st.sets(st.integers(1, 39)),
    delay=st.sampled_from([0.0, 1.0, 3.0]),
)
def test_transitions_do_not_depend_on_how_samples_are_cut_into_blocks(steps, cuts, delay):
    """Whole, in pieces, and with time ticking in between: the same transitions at the same instants."""
    time = np.cumsum([one for one, _ in steps])
    placed = np.array([one for _, one in steps], np.int8)
    rule = Rule(name="x", on_delay=delay, off_delay=delay)
    whole = changes(Alarm(rule), time, placed)
    alarm, pieces = Alarm(rule), []
    edges = [0, *sorted(one for one in cuts if one < len(steps)), len(steps)]
    for begin, end in itertools.pairwise(edges):
        pieces += changes(alarm, time[begin:end], placed[begin:end])
        pieces += [(one.time, one.old, one.new) for one in alarm.tick(float(time[end - 1]))]
    assert pieces == whole
