"""Screens: what a person sees whole. Made of widgets; know no protocol and no storage."""
