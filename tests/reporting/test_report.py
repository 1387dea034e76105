"""The page: nothing missing, everything escaped, rounded and labelled; figures complete and the same each time."""

import re
from dataclasses import fields, replace
from html.parser import HTMLParser

import pandas as pd
import pytest

from sms_resource.reporting import write_report
from sms_resource.reporting.cautions import all_cautions
from sms_resource.reporting.data import BodyEvidence, Evidence, ReportData, Subject
from sms_resource.reporting.figures import MAKERS, all_drawings
from sms_resource.reporting.sections import TITLES, build_document
from sms_resource.reporting.tonnage import rows_at_cutoff, tonnage_table
from tests.reporting.conftest import HOSTILE

KEPT_OUT = (
    "ore",
    "reserve",
    "reserves",
    "proven",
    "probable",
    "compliant",
    "mineable resource",
    "in-situ value",
    "guaranteed",
    "calculated",
)


class Text(HTMLParser):
    """Collects text, tags and the text of table heads."""

    def __init__(self):
        super().__init__()
        self.text, self.tags, self.heads, self.stack, self.images = [], [], [], [], []

    def handle_starttag(self, tag, attrs):
        self.tags.append(tag)
        self.stack.append(tag)
        if tag == "img":
            self.images.append(dict(attrs))

    def handle_endtag(self, tag):
        while self.stack and self.stack.pop() != tag:
            pass

    def handle_data(self, words):
        if "style" in self.stack:
            return
        self.text.append(words)
        if "th" in self.stack:
            self.heads.append(words)


@pytest.fixture(scope="module")
def parsed(page):
    parser = Text()
    parser.feed(page)
    return parser


def test_all_sections_in_order(page):
    places = [page.index(f'<section id="{key}">') for key in TITLES]
    assert places == sorted(places)
    for key in TITLES:
        assert f'href="#{key}"' in page


def test_first_screen_is_the_estimate_and_its_basis(page):
    first = page[: page.index('<nav class="contents"')]
    for words in (
        "Block-model tally at Cu ≥ 1 %",
        "Dry tonnes (kt dry)",
        "Wet tonnes (kt wet)",
        "Indicated",
        "Inferred (approximately)",
        "Effective date",
        "Density (dry; wet)",
    ):
        assert words in first


def test_all_cautions_with_their_figures(page, hostile_data):
    from markupsafe import escape

    for caution in all_cautions(hostile_data):
        assert str(escape(caution.title)) in page
        assert str(escape(" ".join(caution.figures.split()))) in page, caution.key


def test_text_from_data_is_escaped(page, parsed):
    assert "<script" not in page.lower()
    assert "script" not in parsed.tags
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in page
    assert sum(HOSTILE in text for text in ["".join(parsed.text)]) == 1


def test_self_contained(page):
    assert not re.search(r'(src|href)\s*=\s*"(?!data:image/png;base64,|#)', page)
    assert "@import" not in page and "url(" not in page


def test_every_picture_is_there_with_words(parsed, report):
    keys = {drawing.key for drawing in report.document.drawings()}
    assert len(parsed.images) == len(keys) == len(report.pictures)
    for image in parsed.images:
        assert len(image["alt"]) > 15 and len(image["src"]) > 2000
    names = {path.name for path in report.paths}
    for key in keys:
        assert {f"{key}.png", f"{key}.svg", f"{key}.csv"} <= names
    for path in report.paths:
        assert path.stat().st_size > 50, path


def test_every_maker_draws_with_full_data(drawings, page):
    assert "Figures without data in this study" not in page
    assert len({drawing.key for drawing in drawings}) == len(drawings) >= len(MAKERS)
    for drawing in drawings:
        assert drawing.caption.strip() and drawing.alt.strip() and len(drawing.table)


def test_axes_carry_units_plans_a_bar_and_sections_their_exaggeration(drawings):
    unit = re.compile(
        r"\((m|°|%|g/t|t/m³|ratio|count|kt dry|t dry|Mt dry|kt)\)|%|^(Holes|Composites|Drilled"
        r" length)|squared|SD$|g/t|\bratio\b"
    )
    for drawing in drawings:
        for axes in drawing.figure.axes:
            for label in (axes.get_xlabel(), axes.get_ylabel()):
                assert not label or unit.search(label), (drawing.key, label)
        if drawing.key.startswith("plan_"):
            plan = drawing.figure.axes[0]
            texts = [text.get_text() for text in plan.texts]
            assert "N" in texts and any(text.endswith(" m") for text in texts), drawing.key
        if drawing.key.startswith("section_"):
            assert all(
                "vertical exaggeration" in axes.get_title(loc="left")
                for axes in drawing.figure.axes
                if axes.get_xlabel()
            )


def words_in(figure):
    """Every text that stands in a picture itself."""
    texts = [text.get_text() for text in figure.texts]
    texts += [figure.get_suptitle()]
    for axes in figure.axes:
        texts += [axes.get_xlabel(), axes.get_ylabel(), axes.get_title(), axes.get_title(loc="left")]
        texts += [text.get_text() for text in axes.texts]
    return " ".join(texts)


def test_every_picture_of_tonnes_carries_the_tally_label_in_itself(drawings):
    """A picture is taken from a report without its caption, so the label stands in the picture."""
    tonnes = re.compile(r"tonnes|\((?:t|kt|Mt) (?:dry|wet)\)", re.I)
    of_tonnes = [drawing for drawing in drawings if tonnes.search(words_in(drawing.figure))]
    assert {"grade_tonnage", "waterfall", "tornado", "heat_map"} <= {drawing.key for drawing in of_tonnes}
    of_tonnes += [drawing for drawing in drawings if drawing.key == "plan_classes"]
    bare = [drawing.key for drawing in of_tonnes if "block-model tally" not in words_in(drawing.figure)]
    assert not bare


def test_words_kept_out(parsed):
    text = " ".join(parsed.text)
    for word in KEPT_OUT:
        assert not re.search(rf"\b{word}\b", text, re.I), word


def test_every_tonnage_says_dry_or_wet(parsed):
    tonnage = re.compile(r"tonne|\((?:t|kt|Mt)\b", re.I)
    heads = [head for head in parsed.heads if tonnage.search(head)]
    assert len(heads) >= 5
    for head in heads:
        assert re.search(r"\b(dry|wet|metal)\b", head, re.I), head
    text = " ".join(parsed.text)
    for found in re.finditer(r"\d\s(?:Mt|kt)\b(.{0,8})", text):
        assert re.match(r"\s(dry|wet|metal)", found.group(1)), found.group(0)


def test_every_tonnage_of_a_figure_says_dry_or_wet(drawings):
    for drawing in drawings:
        for axes in drawing.figure.axes:
            for label in (axes.get_xlabel(), axes.get_ylabel()):
                assert not re.search(r"tonne", label, re.I) or re.search(r"\b(dry|wet)\b", label, re.I), (
                    drawing.key,
                    label,
                )


def test_totals_and_metal_come_from_unrounded_values(data):
    table = pd.DataFrame(
        {
            "cutoff_variable": "cu_pct",
            "cutoff": 1.0,
            "proposed_class": ["Indicated", "all"],
            "dry_tonnes": [10_863_000.0] * 2,
            "wet_tonnes": [11_400_000.0] * 2,
            "cu_pct": [8.23] * 2,
        }
    )
    one = ReportData(
        subject=Subject(metals=("cu_pct",), cutoff={"variable": "cu_pct", "value": 1.0}),
        value=type(data.value)(grade_tonnage=table),
    )
    shown = tonnage_table(one, rows_at_cutoff(one), "t")
    assert shown.rows[0] == (
        "Indicated",
        "11",
        "11",
        "8.2",
        "890",
    )  # 894 kt of metal from the unrounded values
    assert shown.columns[4] == "Cu contained (kt metal)"
    assert shown.columns[1:3] == ("Dry tonnes (Mt dry)", "Wet tonnes (Mt wet)")


def test_empty_data_still_make_a_report(tmp_path):
    paths = write_report(ReportData(), tmp_path)
    page = paths[0].read_text(encoding="utf-8")
    assert "No table of tonnes came with this run" in page
    assert "Draft for a Competent Person" in page


@pytest.mark.parametrize(
    "part",
    [
        field.name
        for field in fields(Evidence)
        if field.name
        not in ("laboratory", "surface_use", "lost_core_default", "composite_rule", "handheld_used")
    ],
)
def test_any_part_of_the_evidence_may_be_absent(data, part):
    less = replace(data, evidence=replace(data.evidence, **{part: None}))
    assert build_document(less, []).sections


def test_same_data_same_bytes_drawn_by_one_interpreter_or_two(data, tmp_path, monkeypatch):
    small = ReportData(
        subject=data.subject,
        evidence=Evidence(collars=data.evidence.collars, surface_bias=data.evidence.surface_bias),
        body=BodyEvidence(seafloor=data.body.seafloor, outline=data.body.outline),
    )
    written = []
    for name, processors in (("a", 1), ("b", 2)):
        monkeypatch.setattr("sms_resource.second.processors", lambda count=processors: count)
        written.append(write_report(small, tmp_path / name))
    assert len(written[0]) == 10  # the page, and three files for each of three figures
    for one, other in zip(*written):
        assert one.relative_to(tmp_path / "a") == other.relative_to(tmp_path / "b")
        assert one.read_bytes() == other.read_bytes(), one.name


def test_drawing_leaves_no_global_state(data):
    import matplotlib

    before = dict(matplotlib.rcParams)
    all_drawings(ReportData(subject=data.subject, value=data.value))
    assert dict(matplotlib.rcParams) == before


def test_names_that_are_long_or_in_another_script_do_not_break_a_figure(data, tmp_path):
    import warnings

    long = "a very long name of a domain that goes on " * 8
    composites = data.evidence.composites.replace({"domain": {"cap": long, "massive": "硫化物"}})
    density = data.evidence.density_by_domain.assign(domain=[long, "硫化物"])
    waterfall = data.body.waterfall.assign(step=[long, "a", "b", "c", "硫化物"])
    odd = ReportData(
        subject=data.subject,
        evidence=Evidence(composites=composites, density_by_domain=density),
        body=BodyEvidence(waterfall=waterfall),
    )
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        paths = write_report(odd, tmp_path)
    assert {"density.png", "waterfall.png", "log_probability.png"} <= {path.name for path in paths}


def test_a_domain_name_cannot_take_the_place_of_another_figure(data):
    records = tuple(
        replace(record, domain=name, plane_map=None)
        for record, name in zip(data.variograms, ("cap", "cap rock"), strict=True)
    )
    named = replace(data, variograms=records)
    drawings, _ = all_drawings(ReportData(subject=data.subject, variograms=records))
    section = next(s for s in build_document(named, drawings).sections if s.key == "continuity")
    kinds = [type(block).__name__ for block in section.blocks]
    headings = [n for n, kind in enumerate(kinds) if kind == "Heading"]
    assert len(headings) == 2 and kinds.count("Picture") == 2
    assert "Picture" in kinds[headings[0] : headings[1]] and "Picture" in kinds[headings[1] :]


def test_screens_name_contained_metal_not_grade(data):
    from sms_resource.reporting.elements import frame_table
    from sms_resource.reporting.tonnage import screens_table

    body = replace(
        data.body, waterfall=data.body.waterfall.assign(cu_pct=[9000.0, -700.0, -800.0, -100.0, 7400.0])
    )
    columns = frame_table(screens_table(replace(data, body=body)), "t").columns
    assert "Cu contained (t metal)" in columns and "Cu\u00a0(%)" not in columns
