"""Answers on standard output, everything else on standard error. Owns that rule."""

import json
import sys
from collections.abc import Mapping
from typing import Any


def print_json(document: Mapping[str, Any]) -> None:
    """Write one JSON document to standard output."""
    sys.stdout.write(json.dumps(document, ensure_ascii=False, indent=2, allow_nan=False) + "\n")
    sys.stdout.flush()


def print_line(text: str) -> None:
    """Write one line of an answer to standard output."""
    sys.stdout.write(text + "\n")
    sys.stdout.flush()


def say(text: str) -> None:
    """Write one line for the person to standard error."""
    sys.stderr.write(text + "\n")
    sys.stderr.flush()
