import pytest

from checks import ALL as CHECKS
from checks.check import Level
from flows.errors import InputError
from flows.explain import explain
from metrics.indices import ALL as INDICES


@pytest.mark.parametrize("check", CHECKS, ids=lambda check: check.name)
def test_a_check_is_explained_with_its_limits_their_basis_and_what_follows(check):
    told = explain(check.name)
    assert told.startswith(f"{check.name} (check on each {check.level}, revision {check.revision}): {check.title}")
    assert f"Basis: {check.limits.basis}" in told
    assert f"[limits.{check.name}]" in told
    for bound in check.limits.declared():
        assert f"{bound.replace('_', ' ')} {getattr(check.limits, bound):g}" in told
        assert bound in told
    if check.limits_rv is not None:
        assert "right ventricle" in told
    for index in check.spoils:
        assert index in told
    assert told.endswith(f"Remedy: {check.remedy}")
    assert ("Required: a beat it cannot evaluate is rejected." in told) is check.required


@pytest.mark.parametrize("index", INDICES, ids=lambda index: index.name)
def test_an_index_is_explained_with_unit_estimator_needs_and_what_withholds_it(index):
    told = explain(index.name)
    assert told.startswith(f"{index.name} (index, revision ")
    beside = "" if index.primary else " (beside the primary one, never mixed with it)"
    (own,) = [part for part in told.split(f"{index.name} (index, revision ") if f"Estimator: {index.estimator}{beside}\n" in part]
    assert own.startswith(f"{index.revision}): {index.title}")
    for part in (f"Unit: {index.unit}", f"Estimator: {index.estimator}", f"Needs: {index.needs}"):
        assert part in own
    withholding = own.rsplit("fails: ", 1)[1].strip().split(", ")
    assert withholding == [check.name for check in CHECKS if check.level is not Level.BEAT and index.exposed & check.spoils]


@pytest.mark.parametrize("name", [card.name for card in (*CHECKS, *INDICES)])
def test_every_explanation_says_why_from_the_card_s_own_file(name):
    paragraphs = explain(name).split("\n\n")
    assert len(paragraphs) >= 3
    assert paragraphs[1].strip()
    assert "." in paragraphs[1]
    assert '"""' not in explain(name)


def test_the_explanation_is_the_docstring_of_the_file_the_card_stands_in():
    assert "Loop closure: a loop ends where it began." in explain("loop-closure")
    assert "Stroke work: the area of the pressure-volume loop" in explain("SW")
    assert "Ventricular volumes" in explain("EDV")


@pytest.mark.parametrize(
    ("name", "meant"), [("loop-closur", "loop-closure"), ("ees", "Ees"), ("PSRW", "PRSW"), ("zero drift", "zero-drift")]
)
def test_an_unknown_name_is_refused_with_the_one_that_was_meant(name, meant):
    with pytest.raises(InputError) as caught:
        explain(name)
    assert meant in str(caught.value)
    assert name in str(caught.value)


def test_a_name_like_no_other_is_refused_as_well():
    with pytest.raises(InputError, match="neither a check nor an index"):
        explain("")
