"""A session's owner is known by a lock that dies with the process."""

import os
import signal
import subprocess
import sys
from pathlib import Path

import pytest

from storage.errors import LogUnavailableError
from storage.owner import SessionOwner, forget_owner, owner_file, owner_lives

UID = "0123456789abcdef0123456789abcdef"

HOLD = """
import sys, time
from pathlib import Path
from storage.owner import SessionOwner
owner = SessionOwner(Path(sys.argv[1]), sys.argv[2])
print("held", flush=True)
time.sleep(60)
"""


@pytest.fixture
def log(tmp_path: Path) -> Path:
    return tmp_path / "fleet.db"


def test_an_owner_in_this_process_lives_until_it_lets_go(log: Path) -> None:
    owner = SessionOwner(log, UID)
    assert owner_lives(log, UID)
    owner.release()
    assert not owner_lives(log, UID)
    assert not owner_file(log, UID).exists()


def test_looking_does_not_take_the_lock_away(log: Path) -> None:
    owner = SessionOwner(log, UID)
    assert [owner_lives(log, UID) for _ in range(3)] == [True] * 3
    owner.release()


def test_nobody_owns_what_has_no_file(log: Path) -> None:
    assert not owner_lives(log, UID)
    assert list(log.parent.iterdir()) == []


def test_an_owner_that_was_killed_does_not_live(log: Path) -> None:
    held = subprocess.Popen(
        [sys.executable, "-c", HOLD, str(log), UID], stdout=subprocess.PIPE, text=True
    )
    assert held.stdout is not None
    assert held.stdout.readline() == "held\n"
    assert owner_lives(log, UID)
    os.kill(held.pid, signal.SIGKILL)
    held.wait()
    held.stdout.close()
    assert not owner_lives(log, UID)
    assert owner_file(log, UID).exists()
    forget_owner(log, UID)
    forget_owner(log, UID)
    assert not owner_file(log, UID).exists()


def test_owners_of_two_sessions_do_not_meet(log: Path) -> None:
    first, second = SessionOwner(log, UID), SessionOwner(log, UID[::-1])
    first.release()
    assert not owner_lives(log, UID)
    assert owner_lives(log, UID[::-1])
    second.release()


def test_the_lock_file_stays_empty(log: Path) -> None:
    """So that it can be made on a full disk too."""
    owner = SessionOwner(log, UID)
    assert owner_file(log, UID).stat().st_size == 0
    assert [each.name for each in log.parent.iterdir()] == [owner_file(log, UID).name]
    owner.release()


def test_letting_go_twice_is_safe(log: Path) -> None:
    owner = SessionOwner(log, UID)
    owner.release()
    owner.release()


def test_the_same_uid_cannot_be_owned_twice(log: Path) -> None:
    owner = SessionOwner(log, UID)
    with pytest.raises(LogUnavailableError, match="locked"):
        SessionOwner(log, UID)
    owner.release()


def test_a_place_that_takes_no_file(tmp_path: Path) -> None:
    with pytest.raises(LogUnavailableError, match="cannot be opened"):
        SessionOwner(tmp_path / "missing" / "fleet.db", UID)
