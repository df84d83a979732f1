"""Staged orders: when Go is agreed, how often it is said, and when a stage is given up."""

from console.limits import NS_PER_MS, Limits
from console.staging import GO_PERIOD_NS, StageKeeper, StageNews, Standing
from protocol.codes import EVERYONE_ADDRESS
from protocol.message import Go

LEAD_NS = Limits().stage_lead_ns
CONSOLE = 77


def keeper() -> tuple[StageKeeper, dict[int, Standing], int]:
    made = StageKeeper(Limits())
    stage = made.new_stage()
    made.wait_for(5, stage, [1, 2])
    return made, {1: Standing.PENDING, 2: Standing.PENDING}, stage


def test_go_waits_for_all() -> None:
    stages, stands, _ = keeper()
    assert stages.look(stands.__getitem__, 0) == []
    stands[1] = Standing.ACCEPTED
    assert stages.look(stands.__getitem__, 1) == []
    assert stages.due(CONSOLE, [0], 1) == []
    assert stages.next_ns is None
    stands[2] = Standing.ACCEPTED
    assert stages.look(stands.__getitem__, 2) == [StageNews(5, 2 + LEAD_NS)]
    assert stages.next_ns == 2


def test_go_names_stage_and_start_on_every_link_until_the_start() -> None:
    stages, stands, stage = keeper()
    stands.update({1: Standing.ACCEPTED, 2: Standing.ACCEPTED})
    stages.look(stands.__getitem__, 0)
    said = []
    for t_ns in range(0, 2 * LEAD_NS, GO_PERIOD_NS // 5):
        said += [(t_ns, each) for each in stages.due(CONSOLE, [0, 3], t_ns)]
    assert {each.message for _, each in said} == {Go(CONSOLE, stage, LEAD_NS // NS_PER_MS)}
    assert {each.link for _, each in said} == {0, 3}
    assert all(each.address == EVERYONE_ADDRESS and each.urgent for _, each in said)
    assert len(said) == 2 * LEAD_NS // GO_PERIOD_NS
    assert max(t_ns for t_ns, _ in said) < LEAD_NS
    assert stages.next_ns is None


def test_a_stage_of_which_one_ended_early_is_given_up() -> None:
    stages, stands, _ = keeper()
    stands.update({1: Standing.ACCEPTED, 2: Standing.ENDED})
    assert stages.look(stands.__getitem__, 0) == [StageNews(5, None)]
    assert stages.due(CONSOLE, [0], 10 * LEAD_NS) == []
    stands[2] = Standing.ACCEPTED
    assert stages.look(stands.__getitem__, 1) == []


def test_one_that_ends_after_the_start_was_agreed_changes_nothing_for_the_others() -> None:
    stages, stands, _ = keeper()
    stands.update({1: Standing.ACCEPTED, 2: Standing.ACCEPTED})
    stages.look(stands.__getitem__, 0)
    stands[2] = Standing.ENDED
    assert stages.look(stands.__getitem__, 1) == []
    assert len(stages.due(CONSOLE, [0], 1)) == 1


def test_all_stop_says_no_go_any_more() -> None:
    stages, stands, _ = keeper()
    stands.update({1: Standing.ACCEPTED, 2: Standing.ACCEPTED})
    stages.look(stands.__getitem__, 0)
    stages.abandon_all()
    assert stages.due(CONSOLE, [0], 0) == []


def test_stage_numbers_come_round_and_are_never_0() -> None:
    stages = StageKeeper(Limits())
    numbers = [stages.new_stage() for _ in range(600)]
    assert min(numbers) == 1
    assert max(numbers) == 255
    assert all(len(set(numbers[at : at + 255])) == 255 for at in range(345))
