"""The numbers: error over input, margins over signal, the error budget."""

from .conftest import DIVIDER, settle, text


def test_the_error_over_input_is_that_of_the_divider(browse):
    """VIN / 4 is met: the largest error over the input is nothing against what is allowed."""

    async def steps(pilot):
        await pilot.press("n")
        await settle(pilot)
        shown = text(pilot, "#sheet-text")
        assert "error of half over VIN" in shown
        assert "ambient 25 degC" in shown
        assert "╌╌ allowed" in shown
        await pilot.press("m")
        await pilot.pause()
        assert "ambient 25 degC" not in text(pilot, "#sheet-text")

    browse(steps)


def test_the_budget_is_shown_as_sorted_bars(browse, path):
    """Contributions, then totals."""
    path.write_text(
        DIVIDER.replace('value = "1 kohm"', 'value = "1 kohm"\ntolerance = "2 %"').replace(
            "drawer", 'drawer\ntolerance = "1 %"'
        )
    )

    async def steps(pilot):
        await pilot.press("n", "3")
        await settle(pilot)
        lines = text(pilot, "#sheet-text").splitlines()
        bars = [line for line in lines if line.startswith("parts.")]
        assert [line.split()[0] for line in bars] == ["parts.R2.value", "parts.R1.value"]
        assert bars[0].count("█") > bars[1].count("█")
        assert any(line.startswith("worst case") for line in lines)

    browse(steps)


def test_a_sheet_without_anything_says_so(browse):
    """A divider has no loop."""

    async def steps(pilot):
        await pilot.press("n", "2")
        await settle(pilot)
        assert "The design has no loop" in text(pilot, "#sheet-text")

    browse(steps)
