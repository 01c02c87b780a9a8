"""Parameters of a part from its own keys and its model's."""

from __future__ import annotations

from typing import Any

from rulecheck.design.model import Model
from rulecheck.design.parts import NOT_PARAMETERS, PartTable


def merged(part: PartTable, model: Model | None) -> tuple[dict[str, Any], frozenset[str]]:
    """Parameters of a part by name, and those that it or its model states.

    What the part states replaces what the model says, a table such as a headroom as a whole.
    """
    own = part.given - NOT_PARAMETERS
    names = [name for name in type(part).model_fields if name not in NOT_PARAMETERS]
    inherited = model.given - own if model is not None else frozenset()
    parameters = {
        name: getattr(model.parameters if model is not None and name in inherited else part, name) for name in names
    }
    return parameters, own | inherited
