"""The report page: complete, closed in itself, safe with any text, readable numbers."""

from __future__ import annotations

import html
import re
from dataclasses import replace
from html.parser import HTMLParser

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from small_study import make_study

from ribbon.study.captions import caption
from ribbon.study.figures import draw_all, to_svg
from ribbon.study.meaning import meaning
from ribbon.study.numbers import number, quantity, scaled
from ribbon.study.report import inline_svg, render_report
from ribbon.study.result import Check, StudyResult
from ribbon.study.ribbonfile import complete_toml
from ribbon.study.wording import comparison, conventions, facts, peak_current, subtitle

VOID = {"area", "base", "br", "col", "hr", "img", "input", "link", "meta", "source", "wbr"}
NAMESPACES = {"http://www.w3.org/2000/svg", "http://www.w3.org/1999/xlink"}


class Page(HTMLParser):
    """Reads a page, insists on balanced tags, and collects what the tests ask for."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.attributes: list[tuple[str, dict[str, str | None]]] = []
        self.texts: list[tuple[str, str]] = []
        self.feed(text)
        self.close()
        assert self.open == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.attributes.append((tag, dict(attrs)))
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.attributes.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        assert self.open, f"</{tag}> closes nothing"
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        if self.open:
            self.texts.append((self.open[-1], data))

    def text_of(self, tag: str) -> str:
        return "".join(text for where, text in self.texts if where == tag)

    def all(self, tag: str) -> list[dict[str, str | None]]:
        return [attrs for name, attrs in self.attributes if name == tag]


@pytest.fixture(scope="module")
def annulene() -> StudyResult:
    return make_study(title="Möbius annulene")


@pytest.fixture(scope="module")
def drawings(annulene: StudyResult) -> dict[str, str]:
    return {name: to_svg(figure) for name, figure in draw_all(annulene).items()}


@pytest.fixture(scope="module")
def page_text(annulene: StudyResult, drawings: dict[str, str]) -> str:
    return render_report(annulene, drawings)


@pytest.fixture(scope="module")
def page(page_text: str) -> Page:
    return Page(page_text)


# --- the page ----------------------------------------------------------------------------------


@given(title=st.text(st.characters(exclude_categories=["Cs", "Cc"]), min_size=1))
@example(title="<script>alert(1)</script>")
@example(title="</title><img src=x onerror=alert(1)>")
@example(title="{{ 7 * 7 }} {% raw %} & &lt; \" ' -->")
def test_any_title_appears_as_text(annulene: StudyResult, title: str):
    """Whatever the title holds, the page shows it letter by letter and keeps its structure."""
    page = Page(render_report(replace(annulene, title=title), {}))
    assert page.text_of("title") == title
    assert page.text_of("h1") == title
    assert len(page.all("script")) == 1
    assert page.all("img") == []


def test_every_text_of_a_study_is_escaped(annulene: StudyResult):
    """Labels, notes, checks and versions are texts too."""
    bad = "<b onclick='x'>&"
    study = replace(
        annulene,
        cases=(replace(annulene.ribbon, label=bad), *annulene.controls),
        checks=(Check(name=bad, passed=False, value=1.0, limit=0.1, note=bad),),
        notes=(bad,),
        provenance={bad: {bad: bad}},
        seconds={bad: 1.0},
    )
    drawings = {name: to_svg(figure) for name, figure in draw_all(study).items()}
    text = render_report(study, drawings)
    page = Page(text)
    assert "<b onclick" not in text
    assert not any("onclick" in attrs for _, attrs in page.attributes)
    assert html.escape(bad, quote=False) in text.replace("&#39;", "'").replace("&#34;", '"')


def test_tags_balance_and_names_are_unique(page: Page):
    """The page parses, no two elements share a name, and every link inside it leads somewhere."""
    names = [attrs["id"] for _, attrs in page.attributes if "id" in attrs]
    assert len(names) == len(set(names))
    for _, attrs in page.attributes:
        for key in ("href", "xlink:href", "aria-labelledby"):
            target = attrs.get(key)
            if target is not None and not target.startswith("data:"):
                assert target.removeprefix("#") in names


def test_paths_that_clip_belong_to_their_own_drawing(page_text: str):
    """url(#...) points at a name that exists."""
    names = set(re.findall(r'\bid="([^"]+)"', page_text))
    used = set(re.findall(r"url\(#([^)]+)\)", page_text))
    assert used
    assert used <= names


def test_nothing_is_asked_from_outside(page_text: str, page: Page):
    """No address but the names of two XML vocabularies, no imports, no linked files."""
    addresses = set(re.findall(r"(?:https?:)?//[A-Za-z][^\s\"'<>)]*", page_text))
    assert addresses == NAMESPACES
    assert page.all("link") == page.all("iframe") == page.all("object") == []
    assert "@import" not in page_text
    assert all("src" not in attrs for _, attrs in page.attributes)


def test_the_page_says_what_it_is(page: Page):
    """Language, letters, width of the screen, both shades."""
    assert page.all("html") == [{"lang": "en"}]
    metas = {attrs.get("name"): attrs.get("content") for attrs in page.all("meta")}
    assert metas["viewport"] == "width=device-width, initial-scale=1"
    assert metas["color-scheme"] == "light dark"
    assert "prefers-color-scheme: dark" in page.text_of("style")
    assert "@media print" in page.text_of("style")


def test_every_drawing_has_an_alternative_text(page: Page, drawings: dict[str, str]):
    """role and label on each drawing, no fixed size, captions beside."""
    pictures = page.all("svg")
    assert len(pictures) == len(drawings) == len(page.all("figcaption"))
    for picture in pictures:
        assert picture["role"] == "img"
        assert len(picture["aria-label"] or "") > 40
        assert "width" not in picture
        assert "viewbox" in picture


def test_drawings_follow_the_shade_of_the_page(page_text: str):
    """Every colour of a drawing is a variable with a value for the dark page."""
    used = set(re.findall(r"var\(--c([0-9a-f]{6}),", page_text))
    night = page_text[page_text.index("@media (prefers-color-scheme: dark)") :]
    assert len(used) >= 6
    assert all(f"--c{colour}:" in night for colour in used)
    strays = set(re.findall(r"(?:fill|stroke): (#[0-9a-f]{6})", page_text))
    assert strays <= {"#000000"}


def test_the_input_stands_on_the_page(page: Page, annulene: StudyResult):
    """The complete input, defaults filled in, as it can be run again."""
    assert page.text_of("pre") == complete_toml(annulene.file)


def test_long_tables_are_cut_with_a_note():
    """Forty rows at most, and where the rest is found."""
    study = make_study("square", 4, 20, points=0, controls=())
    text = render_report(study, {})
    assert (
        "40 of 80 rows, nearest to the gap. All rows and digits: tables/levels-ribbon.csv" in text
    )
    assert max(body.count("<tr>") for body in text.split("<tbody>")) <= 41


def test_rows_shown_are_those_at_the_gap():
    """Levels 20 to 59 of 80, filled up to 39."""
    study = make_study("square", 4, 20, points=0, controls=())
    text = render_report(study, {})
    table = text[text.index('data-name="levels-ribbon"') :]
    first = re.findall(r"<tr>\s*<td>(\d+)</td>", table[: table.index("</table>")])
    assert [int(level) for level in first] == list(range(20, 60))


def test_numbers_to_save_are_in_full_precision(page: Page, annulene: StudyResult):
    """The button of a table carries its rows as CSV."""
    saved = {attrs["data-file"]: attrs["data-csv"] for attrs in page.all("button") if
             "data-csv" in attrs}  # fmt: skip
    text = saved["levels-ribbon.csv"]
    assert text is not None
    assert text.startswith("level,energy")
    energies = [float(line.split(",")[1]) for line in text.splitlines()[1:]]
    assert energies == annulene.ribbon.levels.energies.tolist()


def test_rounding_is_shown_as_nothing_but_not_in_checks(annulene: StudyResult):
    """1e-16 beside 1 is 0 in a table of energies; in the checks it is the number itself."""
    tiny = Check(name="tiny", passed=True, value=3e-16, limit=1e-9)
    text = render_report(replace(annulene, checks=(*annulene.checks, tiny)), {})
    assert "3 × 10⁻¹⁶" in text


def test_a_large_study_makes_a_page_of_moderate_size():
    """2,000 sites, 101 fluxes, complete spectra and a plain control: below 3 MB."""
    study = make_study("honeycomb-zigzag", 8, 125, points=101, controls=("plain",), title="large")
    drawings = {name: to_svg(figure) for name, figure in draw_all(study).items()}
    assert len(render_report(study, drawings).encode()) < 3_000_000


def test_a_figure_that_is_not_known_still_has_a_place(annulene: StudyResult):
    """A figure under another name is shown under that name."""
    svg = '<svg width="1pt" viewBox="0 0 1 1"><path id="p" style="fill: #20242c"/></svg>'
    inline = inline_svg(svg, "extra", 'says "so"')
    assert 'id="extra-p"' in inline
    assert "var(--c20242c,#20242c)" in inline
    assert 'aria-label="says &#34;so&#34;"' in inline
    assert " width=" not in inline
    assert caption("extra", annulene).title == "extra"


# --- what the numbers say ----------------------------------------------------------------------


def sentences(study: StudyResult) -> str:
    return " ".join(meaning(study))


def test_the_gap_of_the_moebius_annulene_is_quoted(annulene: StudyResult):
    """4 t sin(pi/16) (Heilbronner 1964; references of the tables), none for the other sign."""
    found = {fact.label: fact for fact in facts(annulene)}
    expected = quantity(4 * 2.7 * np.sin(np.pi / 16), "eV")
    assert found["Gap"].value == expected
    assert found["Change of the gap"].value == f"+{expected}"
    assert found["Gap with the other sign"].value == "none"
    assert found["Gap with the other sign"].detail == 'orbital "s"'
    assert found["Half-quantum period"].value == "no"
    assert found["Checks"].value == "2 of 2"


def test_the_largest_current_is_found_beside_the_jump(annulene: StudyResult):
    """Just below half a quantum I = 8 pi t/16 e/h sin(pi/16)/sin(pi/16), here 164.3 µA."""
    peak = peak_current(annulene.ribbon)
    assert peak is not None
    assert peak.flux == 0.5
    assert quantity(abs(peak.current), "A", 3) == quantity(
        38.7404586e-6 * 8 * np.pi * 2.7 / 16, "A", 3
    )


def test_the_shape_is_told_from_the_bonds():
    """One-sided, two-sided, and a strip of three rows is what the words are for."""
    one = make_study(rows=3, length=10, points=0, controls=("plain",))
    assert "single edge" in sentences(one)
    assert "one-sided" in sentences(one)
    two = make_study(rows=3, length=10, half_twists=2, points=0, controls=())
    assert "2 closed edges: the surface is two-sided" in sentences(two)
    assert "2 half twists" in subtitle(two)
    plain = make_study(rows=3, length=10, half_twists=0, points=0, controls=())
    assert "no twist" in subtitle(plain)
    assert "other sign" not in sentences(plain)


def test_holes_are_counted_apart():
    """Edges beyond the ribbon's own are named as holes."""
    study = make_study(rows=3, length=10, half_twists=0, points=0, controls=())
    topology = replace(study.ribbon.topology, boundary_loops=4)
    holed = replace(study, cases=(replace(study.ribbon, topology=topology),))
    assert "4 closed edges, 2 of them around holes or loose ends" in sentences(holed)
    unknown = replace(topology, boundary_loops=None)
    walked = replace(study, cases=(replace(study.ribbon, topology=unknown),))
    assert "The surface is two-sided." in sentences(walked)


def test_an_open_shell_is_not_called_a_gap(annulene: StudyResult):
    """The planar [16]annulene keeps two electrons in two levels at zero."""
    plain = replace(annulene, cases=(annulene.cases[1], annulene.ribbon))
    assert "only partly filled: there is no gap" in sentences(plain)
    assert {row["case"]: row["gap"] for row in comparison(annulene)}["plain ring"] == "none"


def test_failed_checks_are_said_first_of_all(annulene: StudyResult):
    """Whoever reads the page is told not to rely on it."""
    failed = Check(name="covariance of the seam", passed=False, value=1.0, limit=1e-9)
    study = replace(annulene, checks=(*annulene.checks, failed))
    assert "1 of 3 checks failed (covariance of the seam)" in sentences(study)
    text = render_report(study, {})
    assert '<span class="fail">2 of 3 passed.</span>' in text
    assert text.count('<td class="fail">no</td>') == 1


def test_equal_gaps_are_called_the_same(annulene: StudyResult):
    """A control with the very same gap moved nothing."""
    twin = replace(annulene.ribbon, name="plain", label="twin")
    study = replace(annulene, cases=(annulene.ribbon, twin))
    assert "The twin has a gap of 2.107 eV, the same as the ribbon." in sentences(study)


def test_an_incomplete_count_is_admitted(annulene: StudyResult):
    """Checks may pass while the count of levels does not close."""
    levels = annulene.ribbon.levels
    short = replace(levels, certificate=replace(levels.certificate, found=15))
    study = replace(annulene, cases=(replace(annulene.ribbon, levels=short),))
    assert "the count of levels is not complete" in sentences(study)


def test_conventions_name_the_ensemble(annulene: StudyResult):
    """Fixed number or chemical potential, temperature, spin, sign of the charge."""
    text = conventions(annulene)
    assert "charge −e" in text
    assert "2 per level" in text
    assert "fixed number of electrons at 0 K" in text
    sweep = annulene.file.sweep.model_copy(update={"chemical_potential": 0.1, "temperature": 4.0})
    grand = replace(annulene, file=annulene.file.model_copy(update={"sweep": sweep}))
    assert "fixed chemical potential 0.1 eV at 4 K" in conventions(grand)
    sweep = annulene.file.sweep.model_copy(update={"temperature": 4.0})
    warm = replace(annulene, file=annulene.file.model_copy(update={"sweep": sweep}))
    assert "not the canonical ensemble" in conventions(warm)


def test_a_half_quantum_period_is_told_for_levels_and_current(annulene: StudyResult):
    """Levels that repeat, a current that repeats alone, and neither."""

    def told(**known: object) -> str:
        assert annulene.ribbon.half is not None
        half = replace(annulene.ribbon.half, **known)
        return sentences(replace(annulene, cases=(replace(annulene.ribbon, half=half),)))

    assert "the period is half a flux quantum." in told(holds=True, difference=1e-15)
    assert "though the total current repeats" in told(current_difference=0.0)
    assert "the period is h/e." in told()
    assert "the period is h/e." in told(current_difference=None)


def test_a_study_without_currents_says_nothing_of_them():
    """No sweep: no current, no half quantum, no column for them."""
    study = make_study(points=0)
    assert "current" not in sentences(study)
    assert "largest current" not in comparison(study)[0]


def test_levels_without_totals_make_a_page_too(annulene: StudyResult):
    """Large disordered rings have a sweep of some levels, and no totals."""
    case = annulene.ribbon
    assert case.response is not None
    bare = replace(
        case, response=replace(case.response, totals=None), harmonics=None, half=None, gap=case.gap
    )
    study = replace(annulene, cases=(bare,))
    assert set(draw_all(study)) == {"ribbon", "space", "levels", "flux"}
    assert "Largest current" not in {fact.label for fact in facts(study)}
    text = render_report(study, {name: to_svg(f) for name, f in draw_all(study).items()})
    assert "totals-ribbon" not in text
    assert comparison(study)[0]["largest current"] == ""


def test_a_current_that_is_rounding_is_none(annulene: StudyResult):
    """Slopes of 1e-14 eV are not quoted as a current."""
    case = annulene.ribbon
    assert case.response is not None
    assert case.response.totals is not None
    tiny = np.full(25, 1e-14)
    totals = replace(case.response.totals, slope=tiny, left=tiny, right=-tiny)
    peak = peak_current(replace(case, response=replace(case.response, totals=totals)))
    assert peak is not None
    assert peak.current == 0


# --- numbers as text ---------------------------------------------------------------------------


@given(st.floats(min_value=-1e12, max_value=1e12, allow_nan=False))
def test_a_number_keeps_its_value(value: float):
    """Reading the text back gives the value to the digits shown."""
    text = number(value, 6).replace("−", "-").replace(",", "")
    raised = str.maketrans("⁻⁰¹²³⁴⁵⁶⁷⁸⁹", "-0123456789")
    if " × 10" in text:
        mantissa, power = text.split(" × 10")
        text = f"{mantissa}e{power.translate(raised)}"
    assert float(text) == pytest.approx(value, rel=1e-5, abs=0)


@given(st.floats(min_value=1e-14, max_value=1e3))
def test_a_prefix_brings_a_current_into_range(value: float):
    """From 1 to 1000 of the unit shown, and the factor undoes the prefix."""
    factor, label = scaled(value, "A")
    assert 0.999 <= value * factor < 1000.001
    power = {"f": -15, "p": -12, "n": -9, "µ": -6, "m": -3, "": 0, "k": 3}[label[:-1]]
    assert factor * 10.0**power == pytest.approx(1)


def test_odd_numbers_have_words():
    """What is not a number is said so; nothing has no prefix."""
    assert number(float("nan")) == "not known"
    assert number(float("inf")) == "∞"
    assert number(float("-inf")) == "−∞"
    assert scaled(0.0, "A") == (1.0, "A")
    assert quantity(12345678.9, "t") == "1.235 × 10⁷ t"
    assert number(12345.6) == "12,346"
