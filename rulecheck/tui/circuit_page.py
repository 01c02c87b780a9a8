"""The page that draws the circuit around the finding."""

from __future__ import annotations

from textual.content import Content

from rulecheck.findings import Finding
from rulecheck.tui.document import Reading
from rulecheck.tui.page import Page
from rulecheck.tui.wiring_diagram import diagram

CULPRIT = "▶"


class CircuitPage(Page):
    """Parts and nets within two steps of the finding."""

    title = "5 Circuit"

    def content(self, reading: Reading, finding: Finding) -> Content:
        """The drawing."""
        if reading.review is None:
            return Content("")
        if not (finding.parts or finding.nets):
            return Content.styled("The finding is about the whole design.", "$quiet")
        drawn = diagram(reading.review.design, finding.parts, finding.nets)
        lines = [
            Content.styled(f"  {head} {CULPRIT}" if culprit else f"  {head}", "$major bold" if culprit else "$quiet")
            for head, culprit in drawn.heads
        ]
        for row in drawn.rows:
            style = "$major bold" if row.culprit else ""
            lines.append(
                Content.assemble(
                    (f"{CULPRIT if row.culprit else ' '} {row.head} ", style),
                    (row.line, style or "$strong"),
                    (f"  {row.elsewhere}", "$quiet"),
                )
            )
        key = f"{CULPRIT} of the finding\n● [E] pin at the net, ┼ no joint\nto the right: pins at nets not drawn"
        return Content("\n").join([*lines, Content(""), Content.styled(key, "$quiet")])
