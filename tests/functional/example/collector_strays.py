from typing import Annotated
from rulecheck.api import BaseModel, Evidence, Finding, Rule, Severity, Unit

class CollectorStrays(Rule):
    """A log transistor whose collector leaves its base adds Early error and leakage."""
    name = "collector-strays"
    title = "Log transistor with its collector away from its base"
    source = "common practice, no source"
    default_severity = Severity.MINOR

    class Settings(BaseModel):
        limit: Annotated[float, Unit("V")] = 0.05    # takes "50 mV" or SI; defaults are validated too

    def check(self, review, settings):
        points = review.operating_points
        for log in review.structure.log_transistors:
            pins = review.design.parts[log.part].pins
            stray = abs(points.voltage(pins["C"]) - points.voltage(pins["B"]))
            worst = points.worst(stray)              # value and conditions of the largest; ignores nothing silently
            if worst.value > settings.limit:
                yield Finding(f"{log.part}: collector {worst.value * 1e3:.0f} mV from its base", parts=[log.part],
                              nets=[pins["C"]], conditions=worst.conditions, consequence="the log slope bends with the signal",
                              evidence=[Evidence("collector-base voltage", worst.value, "V", settings.limit, "<=", over=stray)])
