"""What a screen must have for the app to hand it pictures of the fleet.

Owns that one interface; a screen has it by its form, since Textual's own base class leaves no
room for an abstract one.
"""

from typing import Protocol, runtime_checkable

from console.widgets.picture import Picture


@runtime_checkable
class ShowsPicture(Protocol):
    """A screen that shows the fleet."""

    def show_picture(self, picture: Picture) -> None:
        """Show it; cheap where nothing changed."""
        ...
