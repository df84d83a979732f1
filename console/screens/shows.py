"""What all screens share: they take pictures of the fleet and show them.

Owns that one interface.
"""

from console.widgets.picture import Picture


class ShowsPicture:
    """Mixed into a screen that the app hands each new picture."""

    def show_picture(self, picture: Picture) -> None:
        """Show it; cheap where nothing changed."""
        raise NotImplementedError
