import copy
import dataclasses
import itertools
import os
from html.parser import HTMLParser
from pathlib import Path

import pytest

from flows.reports.pages import CAUTION, night_html, write_report
from flows.reports.views import AcquisitionView, SiteCount
from tests.flows.reports import made_evidence as made
from tests.flows.reports.screenshots import chromium, measure

VOID = {"meta", "link", "br", "wbr"}
MAKERS = (made.clean, made.right, made.queried, made.rejected, made.long, made.hostile, made.empty)


class Page(HTMLParser):
    """What a test wants to know of a page; a tag that is never closed, or closed twice, is an error."""

    def __init__(self, path: Path) -> None:
        super().__init__()
        self.path, self.open, self.elements, self.words = path, [], [], []
        self.feed(path.read_text(encoding="utf-8"))
        assert not self.open, self.open

    def handle_starttag(self, tag, attrs):
        self.elements.append((tag, dict(attrs), [name for name, _ in self.open]))
        if tag not in VOID:
            self.open.append((tag, dict(attrs)))

    def handle_endtag(self, tag):
        assert self.open, f"{tag} closed twice"
        assert self.open.pop()[0] == tag

    def handle_data(self, data):
        self.words.append(data)

    @property
    def text(self):
        return " ".join(" ".join(self.words).split())

    def having(self, name):
        return [(tag, attributes[name]) for tag, attributes, _ in self.elements if attributes.get(name) is not None]

    @property
    def ids(self):
        return [name for _, name in self.having("id")]


@pytest.fixture(scope="module")
def views():
    return [make() for make in MAKERS]


@pytest.fixture(scope="module")
def report(views, tmp_path_factory):
    folder = tmp_path_factory.mktemp("report")
    write_report(folder, made.make_night(views), iter(views))
    return folder


@pytest.fixture(scope="module")
def pages(report):
    return {path.stem: Page(path) for path in sorted(report.rglob("*.html"))}


def test_there_is_a_page_for_the_night_and_one_an_acquisition(pages, views):
    assert set(pages) == {"index", *(view.row["acquisition"] for view in views)}


def test_every_id_is_unique_and_every_reference_resolves(pages):
    for page in pages.values():
        assert len(page.ids) == len(set(page.ids))
        for name in ("aria-labelledby", "aria-describedby"):
            for _, names in page.having(name):
                assert set(names.split()) <= set(page.ids)
        for _, address in page.having("href"):
            file, _, fragment = address.partition("#")
            target = (page.path.parent / file).resolve() if file else page.path
            assert target.is_file(), address
            if fragment:
                assert fragment in pages[target.stem].ids, address


def test_no_page_asks_for_anything_from_outside_or_runs_a_script(pages):
    for page in pages.values():
        for name in ("href", "src", "srcset", "action", "data", "poster"):
            for _, address in page.having(name):
                assert "//" not in address
                assert ":" not in address
        assert not [tag for tag, _, _ in page.elements if tag in {"script", "iframe", "object", "embed", "img", "form", "base"}]
        assert not [name for _, attributes, _ in page.elements for name in attributes if name.startswith("on") or name == "style"]


def test_every_figure_has_a_title_and_a_description_or_is_hidden_from_readers(pages):
    for page in pages.values():
        for tag, attributes, _ in page.elements:
            if tag == "svg" and attributes.get("class") == "figure":
                title, description = attributes["aria-labelledby"].split()
                assert {title, description} <= set(page.ids)
                assert attributes["role"] in {"img", "group"}
        shown = [attributes for tag, attributes, inside in page.elements if tag == "svg" and "svg" not in inside]
        assert all("aria-labelledby" in attributes or attributes.get("aria-hidden") == "true" for attributes in shown)


def test_every_page_has_landmarks_one_heading_a_language_and_named_tables(pages):
    for page in pages.values():
        tags = [tag for tag, _, _ in page.elements]
        assert [tags.count(tag) for tag in ("main", "footer", "h1")] == [1, 1, 1]
        assert [tag for tag, _, inside in page.elements if inside == ["html", "body"]] == ["a", "header", "main", "footer"]
        assert page.elements[0][1]["lang"] == "en"
        assert tags.count("table") == tags.count("caption")
        assert all("scope" in attributes for tag, attributes, _ in page.elements if tag == "th")
        headings = [int(tag[1]) for tag in tags if tag in {"h1", "h2", "h3", "h4"}]
        assert all(later <= earlier + 1 for earlier, later in itertools.pairwise(headings))


def test_the_caution_stands_on_every_page(pages):
    assert all(CAUTION in page.text for page in pages.values())


@pytest.mark.parametrize(
    ("acquisition", "decision"),
    [("H-003-baseline", "Take it."), ("H-014-baseline", "Ask the site."), ("F-002-baseline", "Do not use it.")],
)
def test_a_page_begins_with_the_verdict_in_words_and_its_reasons(pages, acquisition, decision):
    text = pages[acquisition].text
    assert text.index(decision) < text.index("What happened" if acquisition != "H-003-baseline" else "Every check passed.")
    assert text.index(decision) < text.index("Which beats?") < text.index("Which numbers may be used?")


def test_a_reason_says_what_happened_what_it_costs_and_what_the_site_can_do(pages):
    text = pages["H-014-baseline"].text
    row = text[text.index("The zero of the pressure moved by 6.7 mmHg between the two readings.") :]
    assert "Check zero-drift." in row[:100]
    assert "9 indices: EDP, ESP, Ea, Ees_Ea, PVA, Pmax, V0 and 2 more." in row[:250]
    assert "Say whether the transducer was moved or zeroed again" in row[:330]


def test_withheld_indices_stand_with_their_reason_and_without_a_value(pages):
    text = pages["H-014-baseline"].text
    assert "EDP, ESP, Pmax, Ea, V0, V100, Ees_Ea, PVA, efficiency Zero-drift: the zero of the pressure moved" in text
    assert "10 published, 10 withheld" in text


def test_the_original_and_the_calibration_are_named(pages, views):
    for view in views:
        page = pages[view.row["acquisition"]]
        assert view.row["package_sha256"] in page.text
        assert "alpha 0.82" in page.text


def test_hostile_text_is_text(report, pages):
    source = (report / "acquisitions" / "X-001-baseline.html").read_text(encoding="utf-8")
    assert "<script" not in source
    assert "\u202e" not in source
    assert "\x07" not in source
    assert "49" not in source.split("{{ 7 * 7 }}")[1][:10]
    assert '<script>alert("x")</script>' in pages["X-001-baseline"].text
    assert "\\u202eevil\\u0007" in pages["X-001-baseline"].text


def test_hostile_text_in_the_night_is_text(tmp_path, views):
    night = made.make_night(views)
    packages = [dataclasses.replace(night.packages[0], package=made.HOSTILE, reason=made.HOSTILE, site=made.HOSTILE)]
    sites = [*night.sites, SiteCount(made.HOSTILE, quarantined=1)]
    source = night_html(dataclasses.replace(night, packages=packages, sites=sites, study=made.HOSTILE))
    assert "<script" not in source
    assert "\u202e" not in source
    (tmp_path / "index.html").write_text(source, encoding="utf-8")
    Page(tmp_path / "index.html")


def test_the_same_views_give_the_same_bytes_in_any_order(views, report, tmp_path):
    write_report(tmp_path, made.make_night(views), reversed(views))
    for path in sorted(report.rglob("*")):
        if path.is_file():
            assert path.read_bytes() == (tmp_path / path.relative_to(report)).read_bytes()


def test_a_night_and_its_views_must_agree(views, tmp_path):
    night = made.make_night(views)
    with pytest.raises(ValueError, match="without a view: F-002-baseline"):
        write_report(tmp_path, night, [view for view in views if view.row["acquisition"] != "F-002-baseline"])
    with pytest.raises(ValueError, match="no row in the night, or two views"):
        write_report(tmp_path, night, [*views, views[0]])


def emptied(value):
    """Every number gone, every list of numbers full of holes; names and truths stay."""
    if isinstance(value, dict):
        return {key: value[key] if key == "beat" else emptied(value[key]) for key in value}
    if isinstance(value, list):
        return [item if isinstance(item, int) else emptied(item) for item in value]
    return None if isinstance(value, float) else value


@pytest.mark.parametrize("make", [made.clean, made.right, made.queried, made.rejected])
def test_missing_numbers_break_no_page(make, tmp_path):
    view = make()
    bare = AcquisitionView(emptied(copy.deepcopy(view.evidence)), view.row, indices=[emptied(dict(row)) for row in view.indices])
    write_report(tmp_path, made.make_night([view]), [bare])
    page = Page(tmp_path / "acquisitions" / f"{view.row['acquisition']}.html")
    for word in ("None", "nan", "inf "):
        assert word not in page.text


def test_an_evidence_with_nothing_in_it_has_a_page(tmp_path):
    view = made.empty()
    write_report(tmp_path, made.make_night([view]), [AcquisitionView({}, view.row)])
    text = Page(tmp_path / "acquisitions" / "E-001-baseline.html").text
    assert "No run could be read." in text
    assert "No index was computed." in text


def test_a_reviewers_decision_is_told_beside_the_machines(tmp_path):
    view = made.clean()
    decided = AcquisitionView(view.evidence, {**view.row, "verdict": "queried", "decided_by": "reviewer 7"}, indices=view.indices)
    write_report(tmp_path, made.make_night([view]), [decided])
    text = Page(tmp_path / "acquisitions" / "H-003-baseline.html").text
    assert "Decided by reviewer 7; the program alone said accepted." in text
    assert "Ask the site." in text


def test_changes_between_stages_are_told_or_withheld_with_the_reason(tmp_path):
    view = made.clean()
    change = {"from_stage": "baseline", "to_stage": "infusion", "index": "Ees", "part": "mean", "unit": "mm[Hg]/mL"}
    changes = [
        {**change, "difference": 0.42, "ci_low": 0.1, "ci_high": 0.74, "status": "published", "reason": None},
        {**change, "index": "EDP", "difference": 3.0, "ci_low": 1.0, "ci_high": 5.0, "status": "withheld", "reason": "zero-drift"},
    ]
    write_report(tmp_path, made.make_night([view]), [AcquisitionView(view.evidence, view.row, indices=view.indices, changes=changes)])
    text = Page(tmp_path / "acquisitions" / "H-003-baseline.html").text
    assert "baseline to infusion Ees mean 0.42 mmHg/mL 0.1 to 0.74" in text
    assert "EDP mean withheld Zero-drift." in text


def test_the_night_shows_the_sum_with_its_numbers(pages):
    text = pages["index"].text
    sum_ = text[text.index("Does received add up?") : text.index("Who has to answer?")]
    assert "Yes." in sum_
    assert (
        "11 received = 3 \u00b7 accepted + 2 ? queried + 2 \u00d7 rejected + 2 ! quarantined + 1 \u2026 waiting + 1 \u2190 superseded"
        in sum_
    )
    assert "3 came again with the same content" in sum_


def test_a_sum_that_does_not_hold_is_said_first(views, tmp_path):
    night = made.make_night(views, received=12)
    write_report(tmp_path, night, views)
    page = Page(tmp_path / "index.html")
    assert "No. 12 received, 11 accounted for." in page.text
    assert "\u2260" in page.text
    assert page.text.startswith("tarn, release r-8c1f20ab: received does not add up")


def test_the_night_says_who_has_to_answer_and_what_was_not_taken_in(pages):
    text = pages["index"].text
    assert "4 questions for 2 sites: harbour 3 and mill 1." in text
    part = text[text.index("What was not taken in?") : text.index("What cost most?")]
    for word in (
        "quarantined",
        "its content differs from the manifest",
        "waiting",
        "the newest file is 3 h old",
        "superseded",
        "version 2 of",
    ):
        assert word in part


def test_missing_visits_and_received_ones_are_told_in_words(pages):
    text = pages["index"].text
    part = text[text.index("Did what was expected come?") : text.index("How did each acquisition do?")]
    assert "17 of 22 visits came" in part
    assert part.count("missing nothing came yet") == 5
    assert "H-014 queried" in part


def test_acquisitions_come_worst_first(pages):
    addresses = [address for _, address in pages["index"].having("href") if address.startswith("acquisitions/")]
    table = addresses[-7:]
    assert table[:4] == [f"acquisitions/{name}-baseline.html" for name in ("F-002", "E-001", "X-001", "H-014")]
    assert table[-1] == "acquisitions/H-003-baseline.html"


def test_a_quiet_night_says_so(tmp_path):
    night = made.make_night([], sites=[SiteCount("harbour")], received=0, packages=(), expected=(), reasons=(), gate=())
    write_report(tmp_path, night, [])
    text = Page(tmp_path / "index.html").text
    for words in (
        "No site has to answer anything.",
        "Everything was taken in",
        "Every check passed everywhere.",
        "There is no acquisition",
    ):
        assert words in text


def test_a_broken_promise_is_told(views):
    night = made.make_night(views)
    broken = dataclasses.replace(night.gate[0], kept=False, failing=3)
    assert "1 broken" in night_html(dataclasses.replace(night, gate=[broken, night.gate[1]]))


@pytest.mark.browser
@pytest.mark.browser
@pytest.mark.skipif(chromium() is None and "BEATGATE_DEMAND_ALL_TESTS" not in os.environ, reason="needs a Chromium to look at pages")
@pytest.mark.parametrize("width", [1280, 1920])
@pytest.mark.parametrize("name", ["index.html", "acquisitions/H-014-baseline.html"])
def test_nothing_overlaps_or_leaves_its_place(report, name, width):
    found = measure(report / name, width)
    assert found.pop("height") > 500
    assert not any(found.values()), found
