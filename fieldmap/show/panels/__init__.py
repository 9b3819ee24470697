"""Panels of the notebooks: one class each, on a state that knows no widget."""
