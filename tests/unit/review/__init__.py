"""Checks of rules at work, with rules and designs made for the purpose."""
