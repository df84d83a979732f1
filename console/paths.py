"""Where the console keeps its files, by the platform's rules. Touches no file itself."""

from pathlib import Path
from typing import Final

SHEETS: Final = Path(__file__).parent / "sheets"


def default_log_path() -> Path:
    """The log used where ``--log`` is not given: in the user's data folder."""
    from platformdirs import user_data_path

    return user_data_path("tumblewire", appauthor=False) / "tumblewire.db"


def find_sheet(text: str) -> Path:
    """A run sheet by its file name, or by the name of a shipped one, such as ``speeds``.

    A file of that name in the present folder comes first; what is not found is returned as it
    is, for whoever reads it to say so.
    """
    given = Path(text)
    shipped = SHEETS / f"{given.name.removesuffix('.toml')}.toml"
    return shipped if not given.exists() and given.parent == Path() and shipped.exists() else given
