"""Opening ports, and the advice where that fails."""

import grp
import os
import pty
import socket
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from console.errors import InputError, LinkError
from console.port import READ_TIMEOUT_S, UNKNOWN_HOLDER, holder_of, open_port, permission_advice


@pytest.fixture
def terminal() -> Iterator[tuple[int, int, str]]:
    """A pseudo-terminal's two descriptors and the device's name."""
    master, slave = pty.openpty()
    yield master, slave, os.ttyname(slave)
    os.close(master)
    os.close(slave)


def test_bytes_cross_a_real_device(terminal: tuple[int, int, str]) -> None:
    master, _, name = terminal
    port = open_port(name)
    port.write(b"\x01\x00\xff")
    assert os.read(master, 10) == b"\x01\x00\xff"
    os.write(master, b"abc\x00")
    assert port.read() == b"abc\x00"
    assert port.read() == b""
    port.close()
    port.close()


def test_a_missing_port_says_how_to_find_one() -> None:
    with pytest.raises(LinkError, match=r"/dev/nothing-here: no such port; `tumblewire ports`"):
        open_port("/dev/nothing-here")


def test_a_taken_port_names_the_program_that_holds_it(terminal: tuple[int, int, str]) -> None:
    name = terminal[2]
    port = open_port(name)
    with pytest.raises(LinkError, match=rf"in use by .*\(process {os.getpid()}\)"):
        open_port(name)
    port.close()
    open_port(name).close()


@contextmanager
def unprivileged() -> Iterator[None]:
    """The superuser may open anything: be nobody (65534) for a while."""
    if os.geteuid() != 0:
        yield
        return
    groups, group = os.getgroups(), os.getegid()
    os.setgroups([])
    os.setegid(65534)
    os.seteuid(65534)
    try:
        yield
    finally:
        os.seteuid(0)
        os.setegid(group)
        os.setgroups(groups)


def test_a_forbidden_port_says_which_group_to_join(terminal: tuple[int, int, str]) -> None:
    name = terminal[2]
    os.chmod(name, 0o060)
    group = grp.getgrgid(os.stat(name).st_gid).gr_name
    advice = rf"no permission.*usermod -aG {group} \$USER.*log in again"
    with unprivileged(), pytest.raises(LinkError, match=advice):
        open_port(name)


def test_no_group_helps_where_the_group_may_not_either(tmp_path: Path) -> None:
    device = tmp_path / "device"
    device.touch(mode=0o600)
    assert "ask who looks after this computer" in permission_advice(str(device))
    assert "ask who looks after this computer" in permission_advice(str(tmp_path / "none"))


def test_a_free_device_has_no_holder(tmp_path: Path) -> None:
    device = tmp_path / "device"
    device.touch()
    assert holder_of(str(device)) == UNKNOWN_HOLDER


def test_nobody_listening_says_so() -> None:
    with pytest.raises(LinkError, match="nothing listens there"):
        open_port("socket://127.0.0.1:1")


@pytest.mark.parametrize(
    ("url", "words"),
    [
        ("sim://?foo=1", r"foo: no such option; known are modules, seed"),
        ("sim://?loss=2", r"loss: a probability from 0 to 1"),
        ("sim://?fleet=/nowhere.toml", r"nowhere\.toml"),
        ("nosuch://x", r"nosuch"),
    ],
)
def test_a_bad_url_is_bad_input(url: str, words: str) -> None:
    with pytest.raises(InputError, match=words) as caught:
        open_port(url)
    assert "\n" not in str(caught.value)


def test_a_simulated_port_says_its_pace() -> None:
    port = open_port("sim://?pace=4")
    assert port.pace == 4.0
    port.close()


def test_a_real_port_has_no_pace_of_its_own(terminal: tuple[int, int, str]) -> None:
    port = open_port(terminal[2])
    assert port.pace == 1.0
    port.close()


def test_a_socket_is_read_as_far_as_it_goes_at_once() -> None:
    with socket.create_server(("127.0.0.1", 0)) as server:
        port = open_port(f"socket://127.0.0.1:{server.getsockname()[1]}")
        peer, _ = server.accept()
        with peer:
            peer.sendall(b"x" * 3000)
            pieces = [port.read()]
            while sum(map(len, pieces)) < 3000:
                pieces.append(port.read())
            assert len(pieces) < 10
            began = time.monotonic()
            assert port.read() == b""
            assert time.monotonic() - began >= READ_TIMEOUT_S / 2
        port.close()
