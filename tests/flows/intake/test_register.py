"""Nothing is counted twice, nothing disappears, and the order of the nights decides as little as possible."""

from collections import Counter
from dataclasses import replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

from hypothesis import given, settings
from hypothesis import strategies as st

from flows.intake.arrival import Arrival
from flows.intake.register import Entry, classify

START = datetime(2026, 3, 4, tzinfo=UTC)


def content(letter):
    return letter * 64


def whole(package="p1", letter="a", *, site="harbour", acquisition="A-1", hour=0, declared_site=None):
    return Arrival(
        site,
        package,
        Path(package),
        "complete",
        package_sha256=content(letter),
        received_at=START + timedelta(hours=hour),
        acquisition_name=acquisition,
        declared_site=declared_site or site,
    )


def broken(package="p1", *, site="harbour", reason="rest-1.csv: is listed but missing."):
    return Arrival(site, package, Path(package), "broken", reason)


def waiting(package="p1", *, site="harbour"):
    return Arrival(site, package, Path(package), "waiting", "no manifest-sha256.txt yet", newest_mtime=START)


def statuses(entries):
    return {(entry.site, entry.package, (entry.package_sha256 or "-")[0]): (entry.version, entry.status) for entry in entries}


def assessed(entries, status="accepted"):
    """Return the entries as a night leaves them once the new ones were judged."""
    return [replace(entry, status=status) if entry.status == "new" else entry for entry in entries]


def test_a_first_content_is_new_and_version_one():
    (entry,) = classify([whole()], [])
    assert entry == Entry("harbour", "p1", "A-1", 1, "new", "", START, content("a"))


def test_the_same_inbox_another_night_changes_nothing():
    first = assessed(classify([whole()], []), "queried")
    assert classify([whole()], first) == first


def test_what_was_not_assessed_yet_stays_new():
    first = classify([whole()], [])
    assert classify([whole()], first) == first


def test_a_content_registered_by_an_interrupted_night_keeps_its_time_of_receipt():
    first = classify([whole()], [])
    assert classify([whole(hour=9)], first)[0].received_at == START


def test_the_same_content_twice_in_one_night_counts_once():
    found = classify([whole("p1"), whole("p2", hour=1)], [])
    assert statuses(found) == {("harbour", "p1", "a"): (1, "new"), ("harbour", "p2", "a"): (None, "seen again")}
    assert found[1].reason == "the same content as harbour/p1"


def test_the_same_content_on_a_later_night_adds_one_entry_and_nothing_else():
    first = assessed(classify([whole("p1")], []))
    second = classify([whole("p1"), whole("a-copy", hour=-1)], first)
    assert [entry for entry in second if entry.status != "seen again"] == first
    assert len(second) == 2


def test_a_correction_in_a_new_folder_supersedes():
    first = assessed(classify([whole("p1")], []))
    second = classify([whole("p1"), whole("p2", "b", hour=1)], first)
    assert statuses(second) == {("harbour", "p1", "a"): (1, "superseded"), ("harbour", "p2", "b"): (2, "new")}
    assert second[0].reason == "version 2 came after it"


def test_a_correction_in_the_same_folder_supersedes():
    first = assessed(classify([whole("p1")], []))
    second = classify([whole("p1", "b", hour=1)], first)
    assert statuses(second) == {("harbour", "p1", "a"): (1, "superseded"), ("harbour", "p1", "b"): (2, "new")}


def test_versions_follow_the_time_of_receipt_not_the_order_of_the_nights():
    late_first = classify([whole("p1"), whole("p2", "b", hour=1)], assessed(classify([whole("p2", "b", hour=1)], [])))
    assert statuses(late_first) == {("harbour", "p1", "a"): (1, "superseded"), ("harbour", "p2", "b"): (2, "accepted")}


def test_packages_received_at_the_same_instant_are_ordered_by_name():
    found = classify([whole("p2", "a"), whole("p1", "b")], [])
    assert statuses(found) == {("harbour", "p1", "b"): (1, "superseded"), ("harbour", "p2", "a"): (2, "new")}


def test_going_back_to_an_older_content_is_nothing_new():
    first = classify([whole("p1")], [])
    second = classify([whole("p1", "b", hour=1)], first)
    assert classify([whole("p1", "a", hour=2)], second) == second


def test_broken_then_repaired_in_place_is_an_ordinary_arrival():
    first = classify([broken()], [])
    assert statuses(first) == {("harbour", "p1", "-"): (None, "quarantined")}
    assert statuses(classify([whole()], first)) == {("harbour", "p1", "a"): (1, "new")}


def test_waiting_then_complete_leaves_one_entry():
    first = classify([waiting()], [])
    assert first[0].status == "waiting"
    assert first[0].reason == "no manifest-sha256.txt yet; last change 2026-03-04T00:00:00Z"
    assert statuses(classify([whole()], first)) == {("harbour", "p1", "a"): (1, "new")}


def test_a_folder_that_breaks_later_keeps_what_it_held():
    first = assessed(classify([whole()], []))
    second = classify([broken()], first)
    assert statuses(second) == {("harbour", "p1", "a"): (1, "accepted"), ("harbour", "p1", "-"): (None, "quarantined")}
    assert classify([whole()], second) == first


def test_known_content_stays_when_its_folder_goes_away():
    first = assessed(classify([whole("p1"), whole("p2", hour=1), whole("p3", "b", acquisition="A-2")], []))
    assert classify([], first) == first


def test_a_broken_package_that_goes_away_stays_on_record_once():
    first = classify([broken(), waiting("p2"), broken("note.txt", site="")], [])
    second = classify([], first)
    assert [(entry.package, entry.status) for entry in second] == [("p1", "quarantined")]
    assert second[0].reason.endswith("missing. (no longer in the inbox)")
    assert classify([], second) == second


def test_one_name_from_two_sites_quarantines_the_second():
    found = classify([whole("p1", "b", site="moor", hour=1), whole("p1", "a")], [])
    assert statuses(found) == {("harbour", "p1", "a"): (1, "new"), ("moor", "p1", "b"): (None, "quarantined")}
    assert "taken by site 'harbour'" in found[1].reason


def test_two_sites_at_the_same_instant_are_ordered_by_name():
    found = classify([whole("p1", "b", site="moor"), whole("p1", "a")], [])
    assert statuses(found)["harbour", "p1", "a"] == (1, "new")


def test_a_name_stays_with_the_site_that_had_it_in_an_earlier_night():
    first = assessed(classify([whole("p1", "b", site="moor", hour=1)], []))
    second = classify([whole("p1", "b", site="moor", hour=1), whole("p1", "a")], first)
    assert statuses(second) == {("moor", "p1", "b"): (1, "accepted"), ("harbour", "p1", "a"): (None, "quarantined")}


def test_a_content_in_the_wrong_sites_folder_never_blocks_the_right_one():
    misplaced = whole("p1", site="moor", declared_site="harbour")
    first = classify([misplaced], [])
    assert statuses(first) == {("moor", "p1", "a"): (None, "quarantined")}
    assert "does not match the inbox folder 'moor'" in first[0].reason
    second = classify([misplaced, whole("p1", hour=1)], first)
    assert statuses(second) == {("harbour", "p1", "a"): (1, "new"), ("moor", "p1", "a"): (None, "seen again")}
    assert statuses(classify([misplaced, whole("p1", hour=1)], [])) == statuses(second)


def test_an_unknown_site_that_becomes_known_is_an_ordinary_arrival():
    unknown = replace(whole("p1", site="quay"), state="broken", reason="the study protocol knows no such site.")
    first = classify([unknown], [])
    assert statuses(first) == {("quay", "p1", "a"): (None, "quarantined")}
    assert statuses(classify([whole("p1", site="quay")], first)) == {("quay", "p1", "a"): (1, "new")}


def test_a_refused_content_is_quarantined_under_its_hash_until_it_is_refused_no_more():
    refused = {content("a"): "acquisition.json: chamber: is missing."}
    first = classify([whole()], [], refused)
    assert first == [Entry("harbour", "p1", "A-1", None, "quarantined", refused[content("a")], START, content("a"))]
    assert classify([whole()], first, refused) == first
    assert classify([], first, refused) == first
    assert statuses(classify([whole()], first)) == {("harbour", "p1", "a"): (1, "new")}


def test_a_refused_content_takes_no_name_and_supersedes_nothing():
    refused = {content("b"): "broken"}
    other_site = classify([whole("p1", "b", site="moor", hour=-1), whole("p1", "a")], [], refused)
    assert statuses(other_site)["harbour", "p1", "a"] == (1, "new")
    same_site = classify([whole("p1", "a"), whole("p2", "b", hour=1)], [], refused)
    assert statuses(same_site) == {("harbour", "p1", "a"): (1, "new"), ("harbour", "p2", "b"): (None, "quarantined")}


def test_a_current_version_refused_later_gives_way_to_the_one_before():
    first = assessed(classify([whole("p1"), whole("p2", "b", hour=1)], []))
    second = classify([whole("p1"), whole("p2", "b", hour=1)], first, {content("b"): "breaks the new protocol"})
    assert statuses(second) == {("harbour", "p1", "a"): (1, "new"), ("harbour", "p2", "b"): (None, "quarantined")}


def test_a_declaration_without_a_name_is_quarantined():
    found = classify([whole(acquisition=None)], [])
    assert found[0].status == "quarantined"


SITES = st.sampled_from(["harbour", "moor"])
PACKAGES = st.sampled_from(["p1", "p2", "p3"])


@st.composite
def arrivals_of_a_night(draw):
    """Return one arrival for each of some folders; a content always declares the same site and acquisition."""
    found = []
    for site, package in draw(st.sets(st.tuples(SITES, PACKAGES), max_size=6)):
        kind = draw(st.sampled_from(["whole", "whole", "whole", "broken", "waiting"]))
        if kind == "whole":
            letter = draw(st.sampled_from("abcdef"))
            declared = {"acquisition": f"A-{ord(letter) % 2}", "declared_site": "moor" if letter in "ef" else "harbour"}
            found.append(whole(package, letter, site=site, hour=draw(st.integers(0, 3)), **declared))
        else:
            found.append(broken(package, site=site) if kind == "broken" else waiting(package, site=site))
    return found


@settings(deadline=None)
@given(nights=st.lists(arrivals_of_a_night(), min_size=1, max_size=4), refused=st.sets(st.sampled_from("abcdef"), max_size=2))
def test_whatever_arrives_counts_add_up_and_a_quiet_night_changes_nothing(nights, refused):
    refusals = {content(letter): "refused" for letter in refused}
    known, received = [], set()
    for arrivals in nights:
        received |= {arrival.package_sha256 for arrival in arrivals if arrival.package_sha256}
        known = assessed(classify(arrivals, known, refusals))
        counted = [entry for entry in known if entry.status != "seen again"]
        by_content = Counter(entry.package_sha256 for entry in counted if entry.package_sha256)
        assert by_content == dict.fromkeys(received, 1)
        assert classify(arrivals, known, refusals) == known
        assert classify(list(reversed(arrivals)), list(reversed(known)), refusals) == known
        keys = [(entry.site, entry.package, entry.package_sha256) for entry in known]
        assert len(keys) == len(set(keys))
    assert_versions_make_sense(known)


def assert_versions_make_sense(entries):
    owners, groups = {}, {}
    for entry in entries:
        assert (entry.version is None) == (entry.status in {"quarantined", "waiting", "seen again"})
        if entry.version is not None:
            assert owners.setdefault(entry.acquisition, entry.site) == entry.site
            groups.setdefault(entry.acquisition, []).append(entry)
    for group in groups.values():
        ordered = sorted(group, key=lambda entry: entry.version)
        assert [entry.version for entry in ordered] == list(range(1, len(ordered) + 1))
        assert [entry.received_at for entry in ordered] == sorted(entry.received_at for entry in ordered)
        assert {entry.status for entry in ordered[:-1]} <= {"superseded"}
        assert ordered[-1].status == "accepted"
