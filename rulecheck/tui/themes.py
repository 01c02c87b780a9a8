"""A light and a dark theme; all text on all grounds has a contrast of 4.5:1 or more."""

from __future__ import annotations

from textual.theme import Theme

#: Variables of a theme that colour text, and those that are grounds it stands on.
TEXT = ("major", "minor", "observation", "conceded", "proven", "unproven", "quiet", "strong")
GROUNDS = ("background", "surface", "panel", "chosen")


def _theme(name: str, dark: bool, grounds: tuple[str, str, str, str], text: str, colours: dict[str, str]) -> Theme:
    background, surface, panel, chosen = grounds
    return Theme(
        name=name, dark=dark, primary=colours["strong"], secondary=colours["observation"], accent=colours["strong"],
        warning=colours["minor"], error=colours["major"], success=colours["proven"], foreground=text,
        background=background, surface=surface, panel=panel,
        variables={
            **colours, "chosen": chosen, "ink": text, "text-muted": colours["quiet"],
            "foreground-muted": colours["quiet"], "text-disabled": colours["quiet"],
            "block-cursor-foreground": text, "block-cursor-background": chosen, "block-cursor-text-style": "bold",
            "block-cursor-blurred-foreground": text, "block-cursor-blurred-background": chosen,
            "block-cursor-blurred-text-style": "none", "block-hover-background": panel,
            "footer-background": panel, "footer-foreground": text, "footer-key-background": panel,
            "footer-key-foreground": colours["strong"], "footer-description-background": panel,
            "footer-description-foreground": text, "border": colours["strong"], "border-blurred": colours["quiet"],
            "input-cursor-background": text, "input-cursor-foreground": background,
            "input-selection-background": chosen, "scrollbar": colours["quiet"], "scrollbar-background": surface,
        },
    )  # fmt: skip


DARK = _theme(
    "rulecheck-dark", True, ("#13161b", "#1a1e25", "#232932", "#203352"), "#e8ebf0",
    {
        "major": "#ff9a90", "minor": "#f3c65a", "observation": "#86d6cc", "conceded": "#c3b6ee",
        "proven": "#97db9c", "unproven": "#f0b48a", "quiet": "#aeb6c3", "strong": "#8fc2ff",
    },
)  # fmt: skip
LIGHT = _theme(
    "rulecheck-light", False, ("#ffffff", "#f5f7f9", "#e7ebf0", "#cfe0f5"), "#171b20",
    {
        "major": "#961018", "minor": "#5f4200", "observation": "#00525a", "conceded": "#4b3689",
        "proven": "#155519", "unproven": "#7a3a07", "quiet": "#454d58", "strong": "#0a478f",
    },
)  # fmt: skip
THEMES = (DARK, LIGHT)
