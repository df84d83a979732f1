"""Options: one table for URL and command line, ranges, and errors that say what was expected."""

from dataclasses import fields
from pathlib import Path
from urllib.parse import urlencode

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sim_link.errors import SimInputError
from sim_link.options import MAX_MODULES, OPTIONS, SHIPPED, Fault, FaultKind, SimOptions

CHANCES = st.floats(0.0, 1.0)


def test_defaults_are_a_good_line_in_real_time() -> None:
    options = SimOptions()
    assert (options.loss, options.damage, options.repeat, options.reorder) == (0, 0, 0, 0)
    assert (options.delay_ms, options.rate, options.pace) == (0, 921_600, 1)
    assert (options.modules, options.fleet, options.fault) == (None, None, ())


def test_the_table_names_each_option_once_and_all_of_them() -> None:
    assert list(OPTIONS) == [field.name for field in fields(SimOptions)]
    assert all(option.help and option.expected for option in OPTIONS.values())


def test_a_url_with_everything() -> None:
    url = (
        "sim://?modules=12&seed=7&loss=0.05&damage=0.01&repeat=0.2&reorder=0.1&delay_ms=25"
        "&rate=57600&pace=4&fleet=my%20fleet.toml&fault=silent:birch,weak_brake:cedar@12.5s,"
        "silent:bridge@3s-4s"
    )
    assert SimOptions.from_url(url) == SimOptions(
        modules=12,
        seed=7,
        loss=0.05,
        damage=0.01,
        repeat=0.2,
        reorder=0.1,
        delay_ms=25.0,
        rate=57_600,
        pace=4.0,
        fleet=Path("my fleet.toml"),
        fault=(
            Fault(FaultKind.SILENT, "birch"),
            Fault(FaultKind.WEAK_BRAKE, "cedar", 12_500_000_000),
            Fault(FaultKind.SILENT, "bridge", 3_000_000_000, 4_000_000_000),
        ),
    )


@pytest.mark.parametrize("url", ["sim://", "sim://?", "sim:///"])
def test_a_url_without_options_is_the_practice_fleet(url: str) -> None:
    assert SimOptions.from_url(url) == SimOptions()


def test_plain_values_of_a_command_line_are_taken_and_none_left_out() -> None:
    values = {"modules": 8, "loss": 0.1, "fleet": Path("x.toml"), "fault": None, "pace": None}
    assert SimOptions.from_texts(values) == SimOptions(modules=8, loss=0.1, fleet=Path("x.toml"))


@pytest.mark.parametrize(
    ("query", "said"),
    [
        ("modles=3", "modles: no such option; known are modules, seed, loss"),
        ("modules=0", f"modules: a whole number from 1 to {MAX_MODULES}"),
        ("modules=2.5", "modules: a whole number"),
        ("seed=-1", "seed: a whole number from 0"),
        ("seed=18446744073709551616", "seed: a whole number from 0"),
        ("loss=1.01", "loss: a probability from 0 to 1 is needed, not '1.01'"),
        ("loss=nan", "loss: a probability"),
        ("damage=-0.1", "damage: a probability"),
        ("repeat=x", "repeat: a probability"),
        ("reorder", "reorder: a probability from 0 to 1 is needed, not ''"),
        ("delay_ms=1e9", "delay_ms: milliseconds"),
        ("rate=0", "rate: a rate in baud"),
        ("pace=0", "pace: a number"),
        ("pace=inf", "pace: a number"),
        ("fleet=", "fleet: the name of a fleet file is needed, or of a shipped fleet"),
        ("fault=birch", "fault: KIND:MODULE"),
        ("fault=silent:", "fault: KIND:MODULE"),
        ("fault=lazy:birch", "KIND one of silent, weak_brake, low_battery, restart_on_brake"),
        ("fault=silent:birch@5", "fault: KIND:MODULE, KIND:MODULE@12.5s or KIND:MODULE@12.5s-20s"),
        ("fault=silent:birch@5s-4s", "fault: an end after the beginning is needed, not 5s-4s"),
        ("fault=silent:birch@9999999s", "fault: at most 1000000 s is needed, not 9999999"),
        ("fault=silent:birch,lazy:elm", "is needed, not 'lazy'"),
        ("fault=silent:birch,", "fault: KIND:MODULE"),
        ("seed=1&seed=2", "seed: is given twice"),
    ],
)
def test_a_bad_option_is_one_clear_line(query: str, said: str) -> None:
    with pytest.raises(SimInputError) as caught:
        SimOptions.from_url("sim://?" + query)
    text = str(caught.value)
    assert text.startswith("sim://: ")
    assert said in text
    assert "\n" not in text


@pytest.mark.parametrize("url", ["sim://fleet", "sim://a/b?seed=1", "sim://localhost:80"])
def test_a_place_in_the_url_is_refused(url: str) -> None:
    with pytest.raises(SimInputError, match="options start with a"):
        SimOptions.from_url(url)


def test_errors_name_where_the_option_was_given() -> None:
    with pytest.raises(SimInputError, match=r"^simulate: loss: "):
        SimOptions.from_texts({"loss": "2"}, "simulate")


def test_help_names_every_kind_of_fault_its_times_and_the_shipped_fleets() -> None:
    for kind in FaultKind:
        assert kind in OPTIONS["fault"].help
    assert "KIND:MODULE@12.5s-20s" in OPTIONS["fault"].help
    assert "bridge" in OPTIONS["fault"].help
    assert ", ".join(SHIPPED) in OPTIONS["fleet"].help


@given(
    st.builds(
        SimOptions,
        modules=st.none() | st.integers(1, MAX_MODULES),
        seed=st.integers(0, 2**64 - 1),
        loss=CHANCES,
        damage=CHANCES,
        repeat=CHANCES,
        reorder=CHANCES,
        delay_ms=st.floats(0, 10_000),
        rate=st.integers(300, 10_000_000),
        pace=st.floats(0.01, 1000),
        fault=st.lists(
            st.builds(
                Fault,
                st.sampled_from(FaultKind),
                st.sampled_from(["birch", "mod-009"]),
                st.integers(0, 10**14),
                st.none() | st.integers(10**14 + 1, 10**15),
            ),
            max_size=3,
        ).map(tuple),
    )
)
def test_options_survive_a_url(options: SimOptions) -> None:
    assert SimOptions.from_url("sim://?" + urlencode(options.as_texts())) == options
