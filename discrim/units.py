"""Placeholder interface; see the module's owner."""
