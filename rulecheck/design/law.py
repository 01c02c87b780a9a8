"""The law of a requirement: ordinary arithmetic with dimensions, never run as code.

`law_text` makes the tree, `law_tree` its value and `law_dimension` its dimension.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from rulecheck.design.law_dimension import DimensionCheck, in_unit, missing_scale
from rulecheck.design.law_text import read_tree
from rulecheck.design.law_tree import Node, Values, evaluate
from rulecheck.errors import LawError
from rulecheck.units import NUMBER, Dimension


@dataclass(frozen=True, slots=True)
class Law:
    """A law as read from its text.

    Attributes
    ----------
    text : str
        As written.
    names : frozenset of str
        Names that occur in it.
    """

    text: str
    names: frozenset[str]
    tree: Node = field(repr=False)

    @classmethod
    def parse(cls, text: str, names: Iterable[str]) -> Law:
        """Law from its text.

        Parameters
        ----------
        text : str
            For instance ``"full_scale * (VIN / full_scale) ** 0.5"``.
        names : iterable of str
            Names that may occur.

        Raises
        ------
        LawError
            With the place within the law; all unknown names are reported together.
        """
        tree, found = read_tree(text)
        _check_names(text, found, set(names))
        return cls(text, frozenset(found), tree)

    def evaluate(self, values: Values) -> NDArray[np.float64]:
        """Value of the law over conditions, in SI.

        Parameters
        ----------
        values : mapping of str to float or ndarray, shape (conditions,)
            For every name of the law, constants too, in SI.

        Returns
        -------
        ndarray, shape (conditions,)
            Shapes are broadcast; NaN or infinite where the law has no value.
        """
        return evaluate(self.tree, values)

    def dimension(self, dimensions: Mapping[str, Dimension], constants: Mapping[str, float] | None = None) -> Dimension:
        """Dimension of the law's value.

        Parameters
        ----------
        dimensions : mapping of str to Dimension
            For every name of the law, constants too.
        constants : mapping of str to float, optional
            Names whose values are known; only they may stand in the exponent of a quantity with a unit.

        Raises
        ------
        LawError
            Where dimensions do not agree, with the place and the scale that is missing.
        """
        found = DimensionCheck(self.text, dimensions, constants or {}).of(self.tree)
        return NUMBER if found is None else found

    def check(
        self,
        output: Dimension,
        dimensions: Mapping[str, Dimension],
        constants: Mapping[str, float] | None = None,
    ) -> None:
        """Check that the law's value has the dimension of the output.

        Raises
        ------
        LawError
            As of `dimension`, or saying by what scale to divide or multiply.
        """
        found = DimensionCheck(self.text, dimensions, constants or {}).of(self.tree)
        if found is not None and found != output:
            message = f"the law {self.text!r} is {in_unit(found)}, the output is {in_unit(output)}"
            raise LawError(message, missing_scale(found, output))


def _check_names(text: str, found: Mapping[str, int], known: set[str]) -> None:
    unknown = [name for name in found if name not in known]
    if not unknown:
        return
    places = ", ".join(f"{name!r} at character {found[name] + 1}" for name in unknown)
    near = {name: difflib.get_close_matches(name, sorted(known), n=1) for name in unknown}
    meant = [f"did you mean {words[0]!r} for {name!r}?" for name, words in near.items() if words]
    hint = " ".join(meant) or ("names known here are " + ", ".join(sorted(known)) if known else "")
    raise LawError(f"the law {text!r} has unknown names: {places}", hint)
