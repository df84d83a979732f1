"""From messages to frames: addresses, order, seal, and links that are closed."""

from console.link import Outbox
from console.sealing import ConsoleSeal
from console.sender import Sender
from console.upkeep import Saying
from protocol.codes import CONSOLE_ADDRESS, EVERYONE_ADDRESS
from protocol.frame import FrameDecoder
from protocol.message import BridgeAsk, Packet, Query, Release, Stop, decode
from protocol.pacing import LinePacer
from protocol.seal import KeyRing, open_seal

QUERY = Query(900, 7, 0)
KEYS = KeyRing({0: bytes(range(32))}, sending_slot=0)


def sender(links: int = 2, seal: ConsoleSeal | None = None) -> Sender:
    return Sender([Outbox(LinePacer(921_600)) for _ in range(links)], seal)


def sent(made: Sender) -> list[tuple[int, bytes]]:
    """Everything that goes out in a second, as payloads with their links."""
    decoders = [FrameDecoder(), FrameDecoder()]
    payloads = []
    for t_ns in range(0, 10**9, 10**6):
        for link, data in made.ready(t_ns):
            payloads += [(link, each) for each in decoders[link].feed(data)]
    assert all(isinstance(payload, bytes) for _, payload in payloads)
    return payloads  # type: ignore[return-value]


def packets(made: Sender) -> list[tuple[int, Packet]]:
    return [(link, decode(payload)) for link, payload in sent(made)]


def test_a_message_goes_to_its_address_from_the_console() -> None:
    made = sender()
    made.push(1, 0x11, QUERY)
    assert packets(made) == [(1, Packet(0x11, CONSOLE_ADDRESS, QUERY))]


def test_what_is_urgent_overtakes() -> None:
    made = sender(1)
    made.push(0, 0x11, QUERY)
    made.push(0, EVERYONE_ADDRESS, Stop(3), urgent=True)
    assert [packet.message for _, packet in packets(made)] == [Stop(3), QUERY]


def test_a_broadcast_goes_out_on_each_open_link() -> None:
    made = sender()
    made.open_links.discard(0)
    made.broadcast(Release(9))
    assert packets(made) == [(1, Packet(EVERYONE_ADDRESS, CONSOLE_ADDRESS, Release(9)))]


def test_what_is_due_on_a_closed_link_is_left_out() -> None:
    made = sender()
    made.open_links.discard(1)
    made.say([Saying(0, 2, BridgeAsk(1)), Saying(1, 2, BridgeAsk(1))])
    assert [link for link, _ in packets(made)] == [0]
    assert made.next_ready_ns(0) == [None]


def test_plain_frames_are_dropped_for_one_address_or_for_all() -> None:
    made = sender()
    for link in (0, 1):
        for address in (0x11, 0x12):
            made.push(link, address, QUERY)
    made.push(0, 0x11, Stop(1), urgent=True)
    made.drop_plain(0, 0x11)
    assert [(link, packet.destination) for link, packet in packets(made)] == [
        (0, 0x11),
        (0, 0x12),
        (1, 0x11),
        (1, 0x12),
    ]
    made.push(1, 0x12, QUERY)
    made.drop_plain()
    assert packets(made) == []


def test_only_a_sealed_module_needs_proof() -> None:
    plain = sender()
    plain.prove(0, 0x11, QUERY)
    assert packets(plain) == []
    sealed = sender(seal=ConsoleSeal(KEYS, 900, lambda epoch: None))
    sealed.prove(0, 0x11, QUERY)
    [(_, payload)] = sent(sealed)
    opened = open_seal(KEYS, payload)
    assert decode(opened.payload).message == QUERY  # type: ignore[union-attr]
