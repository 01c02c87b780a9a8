"""What `fix --all-proven` leaves to people: remedies that change the task instead of the circuit."""

import pytest

from rulecheck.findings import Add, Move, Remedy, Set
from rulecheck.review.fixing import changes_what_is_asked


@pytest.mark.parametrize(
    "edit",
    [
        Set("nets.VIN.range", ["1 V", "2 V"]),
        Set("nets.VIN.survives", ["0 V", "2 V"]),
        Set("parts.PD1.photocurrent", ["1 nA", "1 uA"]),
        Set("requirements.root.accuracy", {"absolute": "1 V"}),
        Set("environment.ambient", "25 degC"),
    ],
)
def test_the_task_is_for_people_to_change(edit):
    """A narrower range or a looser requirement makes any design pass."""
    assert changes_what_is_asked(Remedy("narrow it", [edit]))


@pytest.mark.parametrize(
    "edit",
    [Set("parts.R1.value", "10 kohm"), Add("parts.C9", {"kind": "capacitor"}), Move("parts.R1.pins.0", "VREF")],
)
def test_the_circuit_may_be_changed(edit):
    """Values, parts and wires are the circuit's."""
    assert not changes_what_is_asked(Remedy("change it", [edit]))
