"""Options that several verbs share: which numbers they take, and how one is refused."""

import click
import pytest
from click.testing import CliRunner

from eastfall.tui.main import VERBS, cli
from eastfall.tui.verbs.options import Number


@pytest.mark.parametrize("text", ["nan", "inf", "-inf", "1e999", "NaN"])
@pytest.mark.parametrize(
    ("verb", "option"),
    [
        ("expect", "--every"),
        ("expect", "--apart"),
        ("expect", "--toward"),
        ("expect", "--decay"),
        ("expect", "--small"),
        ("record", "--for"),
        ("demo", "--for"),
        ("reduce", "--interval"),
        ("report", "--interval"),
        ("replay", "--speed"),
        ("emulate", "--rate"),
        ("emulate", "--until"),
    ],
)
def test_no_option_takes_what_is_no_finite_number(verb, option, text):
    """No bound holds "nan" back: it made a recording that never ends, and tables full of nan."""
    place = [] if verb == "demo" else ["anything"]
    outcome = CliRunner().invoke(cli, [verb, *place, f"{option}={text}"])
    assert outcome.exit_code == 2, outcome.output
    assert f"'{text}'; expected a number" in outcome.output


def test_every_option_that_takes_a_number_takes_a_finite_one():
    """An option of a float type of the library's own would let "nan" through again."""
    for verb in VERBS:
        command = cli.get_command(click.Context(cli), verb)
        for one in command.params:
            assert isinstance(one.type, Number) or not isinstance(
                one.type, (click.FloatRange, click.types.FloatParamType)
            ), (verb, one.name)


@pytest.mark.parametrize(
    ("kind", "text", "words"),
    [
        (Number(), "x", "'x'; expected a number"),
        (Number(min=0.0, min_open=True), "0", "'0'; expected a number more than 0"),
        (Number(min=0.1), "0", "'0'; expected a number of at least 0.1"),
        (Number(0.0, 1.0), "1.5", "'1.5'; expected a number from 0 to 1"),
    ],
)
def test_a_refused_number_names_what_was_expected(kind, text, words):
    """The bounds stand in the message in words."""
    with pytest.raises(click.BadParameter, match=words):
        kind.convert(text, None, None)


@pytest.mark.parametrize(
    ("kind", "text"), [(Number(0.0, 1.0), "1"), (Number(min=0.1), "0.1"), (Number(), "-3e2")]
)
def test_a_number_at_its_bound_is_taken(kind, text):
    """Bounds that are not open belong to the range."""
    assert kind.convert(text, None, None) == float(text)


@pytest.mark.parametrize(
    ("words", "message"),
    [
        (["--every", "10", "--at", "5"], "--every and --at both say the depths"),
        (["--budget", "--line"], "--budget and --line are two tables"),
        (["--apart", "5"], "--apart speaks of the plumb line; give --line with it"),
        (["--decay", "60", "--budget"], "--decay speaks of the plumb line; give --line with it"),
    ],
)
def test_no_option_of_expect_is_left_aside_in_silence(words, message):
    """An option that the table asked for has no use for is refused."""
    outcome = CliRunner().invoke(cli, ["expect", "anything", *words])
    assert outcome.exit_code == 2
    assert message in outcome.output
