"""A remedy is proven only where the edited design was judged, is cured, and nothing has come in its place."""

import pytest

from rulecheck.api import Add, Finding, Move, Remedy, Remove, Set, Severity
from rulecheck.errors import CommandError
from rulecheck.review import fixing
from rulecheck.review.completion import letters

from .toys import DIVIDER, LowResistor, raising, review, rule


def mended_at(key, value):
    """Whether a key of the design as parsed has a value."""

    def holds(design):
        table = design.data
        for name in key.split("."):
            table = table.get(name, {})
        return table == value

    return holds


FIXED = mended_at("design.title", "mended")
FIX = Set("design.title", "mended")


def toy(after=(), edits=(FIX,), before=()):
    """A rule that finds R1 until the design is mended, and then finds `after`."""

    def found(the_review):
        finding = Finding("bad", parts=["R1"], remedies=[Remedy("Mend it", edits)])
        return after if FIXED(the_review.design) else [finding, *before]

    return rule("toy", found)


def proven(*rules, text=DIVIDER, **options):
    """Whether the remedy of the rule ``toy`` is proven."""
    report = review(rules, text, **options).report()
    (remedy,) = [remedy for f in report.findings for remedy in f.remedies if f.rule == "toy" and f.message == "bad"]
    return remedy.proven


def when_mended(*found):
    """What gives `found` once the design is mended."""
    return lambda the_review: found if FIXED(the_review.design) else ()


def test_each_remedy_is_tried_on_its_own():
    """The first leaves the finding, the second cures it, the third is not an edit."""
    (finding,) = review([LowResistor]).report().findings
    assert [remedy.proven for remedy in finding.remedies] == [False, True, False]


def test_a_remedy_that_cures_is_proven():
    """The finding is gone and nothing has come."""
    assert proven(toy())


@pytest.mark.parametrize("severity", [Severity.MAJOR, Severity.MINOR])
def test_a_new_major_or_minor_of_another_rule_spoils_it(severity):
    """A cure that makes something else worse is none."""
    assert not proven(toy(), rule("other", when_mended(Finding("new", parts=["R2"])), severity=severity))


def test_a_new_observation_of_another_rule_does_not_spoil_it():
    """Something worth knowing is no harm."""
    assert proven(toy(), rule("other", when_mended(Finding("new")), severity=Severity.OBSERVATION))


def test_what_was_there_before_does_not_spoil_it():
    """A remedy answers for its own finding."""
    assert proven(toy(), LowResistor)


def test_a_finding_that_grows_worse_spoils_it():
    """A minor that becomes major is a new major."""
    grows = rule(
        "other",
        lambda r: [Finding("m", severity=Severity.MAJOR if FIXED(r.design) else Severity.MINOR)],
    )
    assert not proven(toy(), grows)


def test_a_finding_that_only_softens_is_not_gone():
    """The same id as an observation is still there."""
    assert not proven(toy(after=[Finding("bad", parts=["R1"], severity=Severity.OBSERVATION)]))


def test_a_finding_of_the_rule_at_the_same_parts_in_other_words_spoils_it():
    """To say "cannot decide" of the same parts is no cure."""
    disguise = Finding("cannot decide", parts=["R1"], subject="undecided", severity=Severity.OBSERVATION)
    assert not proven(toy(after=[disguise]))
    assert proven(toy(after=[disguise], before=[disguise])), "it was there before"


def test_a_new_failure_spoils_it():
    """Where a rule fails on the edited design, its findings are not known."""
    fails = rule("other", lambda r: raising(ValueError())(r) if FIXED(r.design) else [])
    assert not proven(toy(), fails)


def test_a_failure_that_was_there_before_does_not_spoil_it():
    """What was unknown before is unknown still."""
    assert proven(toy(), rule("other", raising(ValueError())))


def test_a_circuit_broken_by_the_remedy_spoils_it():
    """Rules that could not run again prove nothing."""
    breaks = rule("other", when_mended(Finding("open")), severity=Severity.OBSERVATION, blocks=True)
    needy = rule("needy", needs=("structure",))
    assert proven(toy(), breaks, needy)
    breaks = rule("other", when_mended(Finding("open", severity=Severity.MAJOR)), blocks=True)
    assert not proven(toy(), breaks, needy)


def test_switching_a_rule_off_proves_nothing():
    """The finding would be gone with its rule."""
    assert not proven(toy(edits=[Set("rules.toy.enabled", False)]))


@pytest.mark.parametrize(
    "edit",
    [
        Remove("parts.R9"),
        Move("parts.R1.pins.5", "GND"),
        Set("parts.R1.value", "10 kHz"),
        Set("rules.toy.limit", 3),
        Add("parts.R1", {"kind": "resistor"}),
    ],
)
def test_edits_that_do_not_fit_or_make_no_design_are_not_proven(edit):
    """And the rule has not failed: a remedy need not fit every file."""
    report = review([toy(edits=[FIX, edit])]).report()
    assert report.findings[0].remedies[0].proven is False
    assert report.failures == ()


def test_an_edit_with_a_value_that_is_none_of_toml_fails_the_rule():
    """A fault of the rule is reported, and the remedy is not proven."""
    report = review([toy(edits=[Set(7, "x")])]).report()  # type: ignore[arg-type]
    assert report.findings[0].remedies[0].proven is False
    assert report.failures[0].rule == "toy"
    assert "Mend it" in report.failures[0].message


def test_rules_that_did_not_run_are_not_asked_again():
    """Behind a broken circuit there may be more, which the remedy did not bring."""

    def found(the_review):
        return [] if FIXED(the_review.design) else [Finding("bad", parts=["R1"], remedies=[Remedy("Mend it", [FIX])])]

    breaks = rule("toy", found, severity=Severity.MAJOR, blocks=True)
    assert proven(breaks, rule("needy", [Finding("hidden so far")], needs=("structure",)))


def test_a_remedy_of_an_observation_is_tried_too():
    """Worth knowing is worth mending."""
    assert proven(toy(), text=DIVIDER + '[rules.toy]\nseverity = "observation"\n')


def test_equal_remedies_are_judged_once():
    """Two findings with one cure cost one review."""
    runs = []

    def found(the_review):
        runs.append(1)
        remedies = [Remedy("Mend it", [FIX])]
        both = [Finding("a", parts=["R1"], remedies=remedies), Finding("b", parts=["R2"], remedies=remedies)]
        return [] if FIXED(the_review.design) else both

    report = review([rule("toy", found)]).report()
    assert all(finding.remedies[0].proven for finding in report.findings)
    assert len(runs) == 2


def test_letters_count_on_beyond_the_alphabet():
    """From a to z, then aa, ab."""
    assert [letters(i) for i in (0, 25, 26, 27, 52)] == ["a", "z", "aa", "ab", "ba"]


def fix(*rules, text=DIVIDER):
    """All that is proven, applied."""
    return fixing.apply_all_proven(review(rules, text))


def test_all_proven_remedies_are_applied_one_after_another():
    """Each is found on the design as the one before left it, until nothing proven is left."""
    text = DIVIDER.replace("4.7 kohm", "470 ohm")
    fixed = fix(LowResistor, text=text)
    assert [(step.finding.parts, step.remedy.id) for step in fixed.steps] == [(("R1",), "b"), (("R2",), "b")]
    assert fixed.text == text.replace("100 ohm", "1 kohm").replace("470 ohm", "1 kohm")
    assert not fixed.review.findings
    assert len(fixed.before) == 2


def test_a_conceded_finding_is_let_be():
    """What was agreed on is not changed."""
    agreed = '[[concessions]]\nrule = "low-resistor"\nparts = ["R1"]\nreason = "agreed"\n'
    assert fix(LowResistor, text=DIVIDER + agreed).steps == ()


def test_remedies_that_undo_each_other_come_to_an_end():
    """No text is come to twice."""

    def flips(the_review):
        part, other = ("R2", "Divider") if the_review.design.title == "Divided" else ("R1", "Divided")
        return [Finding("m", parts=[part], remedies=[Remedy("Turn", [Set("design.title", other)])])]

    assert len(fix(rule("toy", flips, severity=Severity.OBSERVATION)).steps) == 1


def chosen(selector):
    """The remedy that a selector names on the divider."""
    return fixing.choose(review([LowResistor]), selector)


ID = "low-resistor:" + review([LowResistor]).findings[0].id.partition(":")[2]


def test_without_a_letter_the_first_proven_remedy_is_chosen():
    """The first does not cure, the second does."""
    assert chosen(ID).remedy.id == "b"


def test_with_a_letter_that_remedy_is_chosen():
    """Also one that is not proven."""
    assert chosen(f"{ID}:a").remedy.title == "Raise it a little"


@pytest.mark.parametrize(
    ("selector", "words"),
    [
        (ID[:-1], "did you mean"),
        ("nonsense", "there is no finding"),
        (f"{ID}:q", "it has a, b, c"),
        (f"{ID}:c", "not one that an edit can make"),
    ],
)
def test_what_cannot_be_chosen_is_refused(selector, words):
    """The message says what there is."""
    with pytest.raises(CommandError, match=words):
        chosen(selector)


def test_without_a_letter_and_without_a_proven_remedy_nothing_is_chosen():
    """The user has to name what is not proven."""
    with pytest.raises(CommandError, match=r"no remedy of toy:\w+ is proven"):
        fixing.choose(review([toy(after=[Finding("bad", parts=["R1"])])]), review([toy()]).findings[0].id)
