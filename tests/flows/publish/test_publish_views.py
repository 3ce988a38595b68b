"""What the pages are told: counts that add up, what was expected, and what each check cost."""

from dataclasses import replace

import pytest

from checks import ALL as CHECKS
from flows.publish.gate import Answer
from flows.publish.views import acquisition_views, expected_rows, material, night_view, site_counts
from flows.reports.views import ExpectedRow
from flows.study.protocol import parse_protocol
from tests.flows.made_rows import built, found_rows, package_row, published_rows

SITES = '[study]\nname = "tarn"\nversion = "1"\n[sites.weir]\ntimezone = "UTC"\n[sites.harbour]\ntimezone = "UTC"\n'
VISITS = '[[visits]]\nname = "baseline"\n[[visits]]\nname = "month-6"\n'
SUBJECTS = '[subjects]\nexpected = { harbour = ["H-2", "H-1"] }\n'


def protocol(*parts):
    return parse_protocol("\n".join([SITES, *parts]).encode(), file="protocol.toml")


def made_material(rows, *parts):
    gate = [Answer("beats", "sound", 8, 0)]
    return material(built(rows), protocol(*parts), CHECKS, gate, "0.1.0")


def test_sites_of_the_protocol_stand_first_and_what_lies_outside_has_a_name():
    packages = [
        package_row(),
        package_row(package="up-2", status="seen again"),
        package_row(site=None, package="note.txt", status="quarantined"),
    ]
    counts = site_counts(packages, protocol())
    assert [(count.site, count.total, count.seen_again) for count in counts] == [("weir", 0, 0), ("harbour", 1, 1), ("(outside)", 1, 0)]


def test_received_counts_contents_once_and_what_has_none_each():
    packages = [
        package_row(),
        package_row(package="up-2", status="seen again"),
        package_row(package="up-3", status="waiting", acquisition=None, version=None, package_sha256=None, received_at=None),
        package_row(package="up-4", status="quarantined", acquisition=None, version=None, package_sha256=None, received_at=None),
    ]
    view = night_view(made_material(published_rows(packages=packages)), "name")
    assert view.received == 3 == sum(site.total for site in view.sites)


@pytest.mark.parametrize(
    ("parts", "expected"),
    [
        ((), []),
        ((VISITS,), [("H-1", "baseline", "accepted"), ("H-1", "month-6", "nothing")]),
        ((SUBJECTS,), [("H-2", "any visit", "nothing"), ("H-1", "any visit", "accepted")]),
        (
            (VISITS, SUBJECTS),
            [
                ("H-2", "baseline", "nothing"),
                ("H-2", "month-6", "nothing"),
                ("H-1", "baseline", "accepted"),
                ("H-1", "month-6", "nothing"),
            ],
        ),
    ],
)
def test_expected_is_what_the_protocol_names(parts, expected):
    rows = expected_rows(published_rows()["acquisitions"], protocol(*parts))
    assert rows == [ExpectedRow("harbour", subject, visit, what != "nothing", what) for subject, visit, what in expected]


def test_a_visit_recorded_twice_says_both():
    acquisitions = published_rows()["acquisitions"]
    twice = [*acquisitions, acquisitions[0] | {"acquisition": "second", "verdict": "rejected"}]
    rows = expected_rows(twice, protocol(VISITS))
    assert rows[0] == ExpectedRow("harbour", "H-1", "baseline", received=True, what="accepted, rejected")


def test_what_each_check_cost_is_counted_from_the_tables():
    found = found_rows(verdict="queried")
    found["rejections"].append(
        found["rejections"][0] | {"run": None, "beat": None, "check": "zero-drift", "at_s": None, "action": "withhold"}
    )
    found["rejections"].append(found["rejections"][0] | {"check": "range-edp", "verdict": "suspect", "decisive": False, "action": "none"})
    found["indices"][2] |= {"index": "EDP"}
    view = night_view(made_material(published_rows(found)), "name")
    costs = {row.check: (row.acquisitions, row.runs, row.beats, row.indices_withheld) for row in view.reasons}
    assert costs == {"zero-drift": (1, 0, 0, 1), "flat-line": (1, 2, 2, 0)}
    assert [row.level for row in view.reasons] == ["acquisition", "beat"]


def test_the_night_and_its_acquisitions_show_the_rows_of_the_tables():
    shown = made_material(published_rows())
    view = night_view(shown, "name")
    (row,) = view.acquisitions
    assert (row.indices_published, row.indices_withheld, row.beats, row.beats_accepted) == (1, 1, 8, 6)
    assert (view.release, view.study, view.protocol_version, len(view.gate)) == ("name", "tarn", "1", 1)
    (acquisition,) = acquisition_views(shown, lambda name: {"of": name})
    assert acquisition.evidence == {"of": "H-1-baseline"}
    assert (len(acquisition.runs), len(acquisition.rejections), len(acquisition.indices), len(acquisition.changes)) == (2, 2, 3, 0)
    assert acquisition.row["recorded_at"].isoformat() == "2026-03-04T08:12:00+00:00"
    assert replace(view, release="other").release == "other"
