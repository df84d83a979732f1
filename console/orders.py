"""Orders: the grammar of the order line, and the value that a typed order becomes.

Owns the words, the parser, the completions and the canonical text; all four come from one table
of motions. Knows module names only as they are handed in; knows no fleet, no interlocks and no
wire layout; the reading of words is order_words.py's.

    order     = subjects motion
    subjects  = "all" | name {"," name}
    motion    = "pivot" direction "at" speed ["rpm"] ["on" setting] ["together"]
              | "hop" [direction] "at" speed ["rpm"] ["together"]
              | "twist" direction "at" speed ["rpm"] ["together"]
              | "spin" [direction] "at" speed ["rpm"] ["for" seconds "s"]
              | "rest"
              | "flash" ["for" seconds "s"]
              | "lock" "by" person
              | "unlock" "by" person
              | "set" item "to" number
    direction = "forward" | "back"
    setting   = "floor" | "wall" | "crest" | "flat"
    item      = "wheel-limit" | "telemetry-period" | "battery-low" | "groups"

A person is a word, or several in quotation marks. Limits are in rpm, periods in ms, voltages in
mV; groups are the sum of 1 for the first, 2 for the second, 4 for the third and so on.

Letter case does not matter. A name with a space, a comma or a quotation mark in it, or one that
reads ``all``, stands in quotation marks, with a mark inside written twice.
"""

import re
from collections.abc import Callable, Sequence
from contextlib import suppress
from dataclasses import dataclass, replace
from decimal import Decimal
from typing import Final, NoReturn

from console.errors import InputError
from console.near_miss import did_you_mean
from console.order_words import LATER_WORDS, Token, Words, tokenise
from protocol.codes import Direction, Setting, SettingId
from protocol.message import field_text, text_field

DEFAULT_SPIN_MS: Final = 5_000
DEFAULT_FLASH_MS: Final = 2_000
MAX_TIME_MS: Final = 60_000
"""Longest hold or flash: a wheel turns no longer than a person stays beside it."""
MAX_PIVOT_RPM: Final = 0xFFFF
MAX_SPIN_RPM: Final = 0x7FFF
"""What the fields of the two commands can carry; a module's own limit is an interlock."""

EVERYONE: Final = "all"
BRAKING: Final = frozenset({"pivot", "hop", "twist"})
"""Motions: what brakes the wheel."""
DRIVES: Final = BRAKING | {"spin"}
"""What turns the wheel."""
DIRECTIONS: Final = {"forward": Direction.FORWARD, "back": Direction.BACK}
SETTINGS: Final = {
    "floor": Setting.FLOOR,
    "wall": Setting.WALL,
    "crest": Setting.CREST,
    "flat": Setting.FLAT,
}
ITEMS: Final = {
    "wheel-limit": SettingId.WHEEL_LIMIT_RPM,
    "telemetry-period": SettingId.TELEMETRY_PERIOD_MS,
    "battery-low": SettingId.BATTERY_LOW_MV,
    "groups": SettingId.GROUPS,
}
_ITEM_WORDS: Final = {int(item): word for word, item in ITEMS.items()}

_A_NAME: Final = f"a module name or {EVERYONE!r}"
_ANOTHER_NAME: Final = "another module name"
_PASSED_OVER: Final = frozenset({"rpm"})
"""Words that are understood but never offered: they would stand in front of those that matter."""

_PLAIN_NAME: Final = re.compile(r'[^\s,"]+')
_BETWEEN_WORDS: Final = re.compile(r"[\s,]\Z")
_SPEED: Final = re.compile(r"[0-9]+")
_NUMBER: Final = re.compile(r"-?[0-9]{1,10}")
_MOST: Final = 2**31 - 1
_SECONDS: Final = re.compile(r"([0-9]{1,6}(?:\.[0-9]{1,3})?)(s?)")


@dataclass(frozen=True, slots=True)
class Order:
    """What a person or a sheet asks for. ``subjects`` empty: everyone. ``speed_rpm`` is never
    negative; ``direction`` tells the sense. ``together``: all at one agreed time. ``person`` puts
    a lock on or takes it off; ``item`` is the number of a setting that gets ``value``. Fields
    that the motion lacks are None, 0, empty or False."""

    subjects: tuple[str, ...]
    motion: str
    setting: Setting | None
    direction: Direction | None
    speed_rpm: int
    duration_ms: int
    together: bool = False
    person: str = ""
    item: int = 0
    value: int = 0


def parse_order(text: str, known_names: Sequence[str]) -> Order:
    """Read one typed order; names come back as the modules spell them.

    Raises InputError, one line: what was expected, after which word, and a near miss.
    """
    tokens = tokenise(text)
    if not tokens:
        raise InputError("empty order: expected who and what, such as 'all rest'")
    if not tokens[-1].closed:
        raise InputError(
            f"expected a closing quotation mark (opened in column {tokens[-1].column})"
        )
    words = Words(tokens)
    return _order(words, known_names)


def complete(text: str, known_names: Sequence[str]) -> list[str]:
    """Return the words that may come next, or that end the word begun, whole, in the grammar's
    order. Speeds and times are never offered: a figure is the person's to choose."""
    tokens = tokenise(text)
    begun = ""
    if tokens and (not tokens[-1].closed or not _BETWEEN_WORDS.search(text)):
        begun = tokens.pop().text.casefold()
    words = Words(tokens)
    # What is wrong with the words so far is for parse_order to say; here only what the parser
    # looked for at their end counts.
    with suppress(InputError):
        _order(words, known_names)
    if not words.at_end:
        return []
    offered = (each for each in words.tried if each not in _PASSED_OVER)
    return [each for each in offered if each.strip('"').casefold().startswith(begun)]


def render(order: Order) -> str:
    """Return the canonical text, which leaves nothing to a default; parse_order reads it."""
    parts = [", ".join(map(_shown, order.subjects)) or EVERYONE, order.motion]
    if order.direction is not None:
        parts.append(order.direction.name.lower())
    if order.speed_rpm:
        parts.append(f"at {order.speed_rpm}")
    if order.setting is not None:
        parts.append(f"on {order.setting.name.lower()}")
    if order.duration_ms:
        parts.append(f"for {order.duration_ms / 1000:g} s")
    if order.person:
        parts.append(f"by {_shown(order.person)}")
    if order.item:
        parts.append(f"{_ITEM_WORDS[order.item]} to {order.value}")
    if order.together:
        parts.append("together")
    return " ".join(parts)


def _shown(name: str) -> str:
    if _PLAIN_NAME.fullmatch(name) and name.casefold() != EVERYONE:
        return name
    return '"' + name.replace('"', '""') + '"'


def _order(words: Words, known: Sequence[str]) -> Order:
    subjects = _subjects(words, known)
    token = words.token
    if subjects and token is not None and token.text in known and token.text not in _MOTIONS:
        words.fail("a comma between module names", f"{subjects[-1]}, {token.text}")
    motion = _MOTIONS[words.need(f"a motion ({', '.join(_MOTIONS)})", *_MOTIONS)]
    order = replace(motion.blank, subjects=subjects)
    for clause in motion.clauses:
        order = clause(words, order)
    if not words.at_end:
        more = [f"{each!r}" for each in words.tried]
        words.fail(" or ".join([*more, "the end of the order"]))
    return order


def _subjects(words: Words, known: Sequence[str]) -> tuple[str, ...]:
    if words.take(EVERYONE):
        return ()
    names = [_name(words, known, ())]
    while words.take_comma():
        names.append(_name(words, known, names))
    return tuple(names)


def _name(words: Words, known: Sequence[str], said: Sequence[str]) -> str:
    words.tried += [_shown(each) for each in dict.fromkeys(known) if each and each not in said]
    token = words.token
    if token is None:
        words.fail(_ANOTHER_NAME if said else _A_NAME)
    name = _known_name(token, known)
    if not name:
        _fail_name(words, token, said, known)
    if name in said:
        raise InputError(f"{name!r} stands twice (column {token.column}); expected each name once")
    if list(known).count(name) > 1:
        raise InputError(
            f"more than one module is called {name!r}: expected names that differ;"
            f" '{EVERYONE} rest' reaches them all"
        )
    words.advance()
    return name


def _known_name(token: Token, known: Sequence[str]) -> str:
    """Find a name as written, else the only one that differs in letter case alone, else ''."""
    if token.folded == EVERYONE:
        return ""
    if token.text in known:
        return token.text
    folded = {each for each in known if each.casefold() == token.text.casefold()}
    return folded.pop() if len(folded) == 1 else ""


def _fail_name(words: Words, token: Token, said: Sequence[str], known: Sequence[str]) -> NoReturn:
    if said and token.folded == EVERYONE:
        raise InputError(f"expected module names or {EVERYONE!r}, not both (column {token.column})")
    if not said and token.folded in _MOTIONS:
        words.fail(_A_NAME, f"{EVERYONE} rest")
    if token.folded in LATER_WORDS or token.folded == ",":
        words.fail(_ANOTHER_NAME if said else _A_NAME)
    if not any(known):
        raise InputError(f"no module has been heard, so none is called {token.shown}")
    raise InputError(
        f"no module is called {token.shown} (column {token.column})"
        + did_you_mean(token.text, words.tried)
    )


def _direction(words: Words, order: Order) -> Order:
    word = words.need("a direction (forward or back)", *DIRECTIONS, example="forward at 4400")
    return replace(order, direction=DIRECTIONS[word])


def _direction_if_any(words: Words, order: Order) -> Order:
    word = words.take(*DIRECTIONS)
    return replace(order, direction=DIRECTIONS[word]) if word else order


def _speed(words: Words, order: Order) -> Order:
    words.need("'at' and a speed", "at", example="at 4400")
    token = words.token
    if token is None or not _SPEED.fullmatch(token.folded):
        words.fail("a speed", "at 4400")
    limit_rpm = MAX_SPIN_RPM if order.motion == "spin" else MAX_PIVOT_RPM
    digits = token.text.lstrip("0")
    if not digits or len(digits) > 5 or int(digits) > limit_rpm:
        words.fail(f"a speed from 1 to {limit_rpm} rpm", "at 4400")
    words.advance()
    words.take("rpm")
    return replace(order, speed_rpm=int(digits))


def _setting(words: Words, order: Order) -> Order:
    if not words.take("on"):
        return order
    word = words.need(f"a setting ({', '.join(SETTINGS)})", *SETTINGS, example="on floor")
    return replace(order, setting=SETTINGS[word])


def _time(words: Words, order: Order) -> Order:
    if not words.take("for"):
        return order
    token = words.token
    match = None if token is None else _SECONDS.fullmatch(token.folded)
    if match is None:
        words.fail("a time in seconds", "for 3 s")
    duration_ms = int(Decimal(match[1]) * 1000)
    if not 1 <= duration_ms <= MAX_TIME_MS:
        words.fail(f"a time from 0.001 to {MAX_TIME_MS // 1000} seconds", "for 3 s")
    words.advance()
    if not match[2]:
        words.need("'s' for seconds", "s", example="for 3 s")
    return replace(order, duration_ms=duration_ms)


def _together(words: Words, order: Order) -> Order:
    return replace(order, together=bool(words.take("together")))


def _person(words: Words, order: Order) -> Order:
    words.need("'by' and a person's name", "by", example="by Ada")
    token = words.token
    if token is None or not token.text.strip() or token.folded == ",":
        words.fail("a person's name", "by Ada")
    words.advance()
    return replace(order, person=field_text(text_field(token.text.strip())))


def _item(words: Words, order: Order) -> Order:
    word = words.need(f"a setting ({', '.join(ITEMS)})", *ITEMS, example="wheel-limit to 6000")
    words.need("'to' and a number", "to", example="to 6000")
    token = words.token
    if token is None or not _NUMBER.fullmatch(token.folded) or abs(int(token.folded)) > _MOST:
        words.fail("a whole number", "to 6000")
    words.advance()
    return replace(order, item=int(ITEMS[word]), value=int(token.folded))


@dataclass(frozen=True, slots=True)
class _Motion:
    """One row of the grammar: the order before anything is said, and its clauses in turn."""

    blank: Order
    clauses: tuple[Callable[[Words, Order], Order], ...]


_MOTIONS: Final = {
    "pivot": _Motion(
        Order((), "pivot", Setting.FLOOR, None, 0, 0), (_direction, _speed, _setting, _together)
    ),
    "hop": _Motion(
        Order((), "hop", None, Direction.FORWARD, 0, 0), (_direction_if_any, _speed, _together)
    ),
    "twist": _Motion(Order((), "twist", None, None, 0, 0), (_direction, _speed, _together)),
    "spin": _Motion(
        Order((), "spin", None, Direction.FORWARD, 0, DEFAULT_SPIN_MS),
        (_direction_if_any, _speed, _time),
    ),
    "rest": _Motion(Order((), "rest", None, None, 0, 0), ()),
    "flash": _Motion(Order((), "flash", None, None, 0, DEFAULT_FLASH_MS), (_time,)),
    "lock": _Motion(Order((), "lock", None, None, 0, 0), (_person,)),
    "unlock": _Motion(Order((), "unlock", None, None, 0, 0), (_person,)),
    "set": _Motion(Order((), "set", None, None, 0, 0), (_item,)),
}
