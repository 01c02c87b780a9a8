"""Checks of the report formats on reports made for the purpose."""
