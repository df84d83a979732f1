"""Widgets: the parts of the screens, and the words and columns that they show."""
