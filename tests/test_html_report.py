"""The report as one HTML file: it says what the text says, stands alone, and takes no orders from what it shows."""

import os
import re
import subprocess
import sys
from collections import Counter
from dataclasses import dataclass, field
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest

import leanloop
from leanloop.output import content_svg, html, text
from leanloop.output.content import Listing, Section, Sentence, Table

ROOT = Path(__file__).resolve().parents[1]
VENT, SCRUBBER = (ROOT / "flowsheets" / name for name in ("coating_vent.toml", "acetone_scrubber.toml"))
README = (ROOT / "README.md").read_text(encoding="utf-8")
HOSTILE = '<script>alert(1)</script> & "x"'
VOID = {"meta", "wbr", "link", "br", "hr", "img", "input", "base", "source", "embed", "col"}
PICTURE = """<?xml version="1.0" encoding="utf-8" standalone="no"?>
<!DOCTYPE svg PUBLIC "-//W3C//DTD SVG 1.1//EN"
  "http://www.w3.org/Graphics/SVG/1.1/DTD/svg11.dtd">
<svg xmlns:xlink="http://www.w3.org/1999/xlink" width="46pt" height="34pt" viewBox="0 0 46 34" xmlns="http://www.w3.org/2000/svg">
 <metadata><rdf:RDF xmlns:rdf="http://www.w3.org/1999/02/22-rdf-syntax-ns#"><rdf:li>http://example.org/</rdf:li></rdf:RDF></metadata>
 <!-- drawn at http://example.org/ -->
 <defs><style type="text/css">*{stroke-linejoin: round} .a, .b {fill: url(#shade)}</style>
  <path id="mark" d="M 0 0
L 1 1"/><clipPath id="clip"><rect width="9" height="9"/></clipPath><linearGradient id="shade"/></defs>
 <g id="figure_1" clip-path="url(#clip)" style="fill: url('#shade')"><use xlink:href="#mark" x="3"/>
  <text>a &lt; b &amp; c</text></g>
</svg>
"""


@pytest.fixture(scope="module")
def results(tmp_path_factory):
    column = tmp_path_factory.mktemp("column") / "column.toml"
    column.write_text(re.search(r"^```toml\n(.*?)^```$", README, re.M | re.S)[1], encoding="utf-8")
    return {
        "vent": leanloop.read(VENT).solve(),
        "scrubber": leanloop.read(SCRUBBER).solve(),
        "column": leanloop.read(column).solve(),
        "as given": leanloop.read(SCRUBBER, ["requirements.emission.at_most=500 mg/Nm3"]).solve(),
        "unreached": leanloop.read(VENT, ["requirements.emission.equals=1 mg/Nm3"]).solve(),
        "dry": dry(),
        "batch": leanloop.read(VENT).solve({"feeds.steam.flow": np.array([0.02, 1e-4, 0.03])}),
    }


SINGLE = ["vent", "scrubber", "column", "as given", "unreached", "dry"]
EVERY = [*SINGLE, "batch"]


@dataclass
class Found:
    """A table of a page, or a figure, and the heading that it stands under."""

    heading: str
    head: list = field(default_factory=list)
    rows: list = field(default_factory=list)
    classes: list = field(default_factory=list)
    head_classes: list = field(default_factory=list)


class Page(HTMLParser):
    """Reads a page; faults of its form are gathered in `faults`."""

    def __init__(self, source):
        super().__init__()
        self.source = source
        self.open, self.faults, self.ids, self.tags = [], [], [], Counter()
        self.tables, self.figures, self.words, self.attributes = [], [], [], []
        self.heading = self.title = ""
        self.feed(source)
        self.close()
        self.faults += [f"{tag} is not closed" for tag in self.open]

    def handle_starttag(self, tag, attrs):
        self.handle_startendtag(tag, attrs)
        if tag not in VOID:
            self.open.append(tag)

    def handle_startendtag(self, tag, attrs):
        self.tags[tag] += 1
        names = [name for name, _ in attrs]
        self.faults += [f"{tag} has {name} twice" for name in set(names) if names.count(name) > 1]
        self.attributes += [(tag, *pair) for pair in attrs]
        self.ids += [value for name, value in attrs if name == "id"]
        if tag == "h2":
            self.heading = ""
        elif tag == "table":
            self.tables.append(Found(self.heading))
        elif tag == "figure":
            self.figures.append(Found(self.heading))
        elif tag == "tr" and "tbody" in self.open:
            self.tables[-1].rows.append([])
            self.tables[-1].classes.append([])
        elif tag in ("th", "td"):
            row = self.tables[-1].rows[-1] if "tbody" in self.open else self.tables[-1].head
            row.append("")
            classes = self.tables[-1].classes[-1] if "tbody" in self.open else self.tables[-1].head_classes
            classes.append(dict(attrs).get("class"))
            if tag == "th" and dict(attrs).get("scope") != ("row" if "tbody" in self.open else "col"):
                self.faults.append("a head without its scope")

    def handle_endtag(self, tag):
        if not self.open or self.open[-1] != tag:
            self.faults.append(f"{tag} closed where {self.open[-1:]} is open")
        else:
            self.open.pop()

    def handle_data(self, data):
        inside = self.open[-1] if self.open else ""
        if inside == "h2":
            self.heading += data
        elif inside == "title":
            self.title += data
        elif inside in ("th", "td"):
            row = self.tables[-1].rows[-1] if "tbody" in self.open else self.tables[-1].head
            row[-1] += data
        if inside not in ("style", "title") and "svg" not in self.open:
            self.words.append(data)

    def handle_comment(self, data):
        self.faults.append(f"comment {data}")

    def handle_pi(self, data):
        self.faults.append(f"instruction {data}")

    def outside(self):
        """What leads outside the page or runs on it."""
        found = [f"{tag} {name}={value}" for tag, name, value in self.attributes
                 if (name.rpartition(":")[2] in ("src", "href", "action", "data", "srcset") and not value.startswith("#"))
                 or name.startswith("on")]  # fmt: skip
        found += [tag for tag in ("script", "link", "iframe", "object", "embed", "base", "img", "form") if self.tags[tag]]
        bare = re.sub(r'xmlns(:\w+)?="[^"]*"', "", self.source)
        return found + re.findall(r"https?:\S*|url\((?!#)[^)]*\)|@import", bare)

    def dangling(self):
        """Fragments that lead to nothing on the page."""
        asked = [value[1:] for _, name, value in self.attributes if name == "href"]
        return set(asked + re.findall(r"url\(#([^)]*)\)", self.source)) - set(self.ids)


def dry():
    """A column without any solvent."""
    sheet = leanloop.Flowsheet(
        components={"air": {"stays_in": "gas"}, "sol": {}, "oil": {"stays_in": "liquid"}},
        equilibrium={"cold": {"sol": {"model": "constant", "K": 0.25}}},
        feeds={
            "vent": {"phase": "gas", "temperature": 300.0, "pressure": 1e5, "flows": {"air": 6.0, "sol": 0.05}},
            "liquor": {"phase": "liquid", "temperature": 300.0, "pressure": 1e5, "flows": {"oil": 0.0}},
        },
        units={"wash": {"kind": "absorber", "gas_in": "vent", "liquid_in": "liquor", "gas_out": "clean", "liquid_out": "rich",
                        "stages": 3, "equilibrium": "cold"}},
    )  # fmt: skip
    return sheet.solve()


def cells(line):
    return tuple(re.split(r" {2,}", line.strip()))


class TestSaysWhatTheTextSays:
    @pytest.mark.parametrize("name", EVERY)
    def test_every_table(self, results, name):
        """Rows of three cells and more are those of tables in the text, each as often on the page."""
        rows = Counter(cells(line) for line in str(results[name]).splitlines() if len(cells(line)) > 2)
        page = Page(html.page(results[name]))
        shown = Counter()
        for table in page.tables:
            if table.heading not in ("Asked for", ""):
                shown.update([tuple(table.head), *map(tuple, table.rows)])
                assert all(len(row) == len(table.head) for row in table.rows)
        assert shown == rows
        assert bool(rows) == (name != "batch")

    @pytest.mark.parametrize("name", EVERY)
    def test_every_sentence(self, results, name):
        """Lines that are no table's; requirements and statuses of cases are tables on the page, tested below."""
        page = Page(html.page(results[name]))
        words = [line for block in page.words for line in block.splitlines()] + [" ".join(page.words)]
        skipped = seen = 0
        block = ""
        for line in str(results[name]).splitlines():
            block = line if not block or not line else block  # the first line after an empty one
            if not line or set(line) == {"="} or len(cells(line)) > 2:
                continue
            if block in ("Asked for", "3 cases") and line != block:
                skipped += 1
                continue
            line = line.strip().removeprefix("* ")
            if line.startswith(("Column wash (", "Column strip (", "Column scrub (", "Solvent loop:")):
                head, _, detail = line.partition(": ")
                assert head in words and detail in words
            elif line.startswith("Status: "):
                assert line in re.sub(r"\s+", " ", "".join(page.words))
            else:
                assert line in words
            seen += 1
        assert seen > 3
        assert skipped == {"vent": 2, "scrubber": 2, "as given": 1, "unreached": 1, "batch": 2}.get(name, 0)

    @pytest.mark.parametrize("name", ["vent", "scrubber", "as given", "unreached"])
    def test_requirements(self, results, name):
        """Every word and figure of the lines of the text."""
        lines = re.search(r"^Asked for\n(.*?)\n\n", str(results[name]), re.M | re.S)[1]
        (table,) = [table for table in Page(html.page(results[name])).tables if table.heading == "Asked for"]
        (row,) = table.rows
        own, address, asked, outcome, have, free, value, others = row
        expected = f"  {own}: {address} {asked}: {outcome}, at {have} with {free} = {value}"
        assert lines == expected + (f"\n    also solved by {others}" if others != "-" else "")

    def test_cases_of_a_batch(self, results):
        result = results["batch"]
        (table,) = Page(html.page(result)).tables
        assert table.rows == [
            ["converged", "2", "0", result.status_text[0]],
            ["out_of_reach", "1", "1", result.status_text[1]],
        ]

    def test_readme_text(self):
        """The text is set from the same sections; residuals and closures are rounding."""
        shown = re.search(r"<!-- output -->\n```text\n(.*?)^```$", README, re.M | re.S)[1]

        def settled(report):
            report = re.sub(r"residual \S+ of", "residual # of", report)
            return re.sub(r"(?m)^(  \S+ +[\d.e+-]+ +[\d.e+-]+) +\S+$", r"\1 #", report)

        assert settled(text.report(leanloop.read(VENT).solve())) == settled(shown)

    def test_text_of_every_part(self):
        sections = [
            Section("", [Sentence("Nothing is wrong.", 0, "status")]),
            Section("Made", [Sentence("one", 1), Sentence("two", 2), Listing(["a", "b"])], "of parts", "made"),
            Section("Tables", [Table(["name", "value"], [["first", "1"], ["x", "10.5"]], "unseen", 2),
                               Table(["h"], [["r"]], instead=[Sentence("r under h")])]),
        ]  # fmt: skip
        assert text.render(sections, "Title") == (
            "Title\n=====\n\nNothing is wrong.\n\nMade: of parts\n  one\n    two\n  * a\n  * b\n\n"
            "Tables\n    name   value\n    first      1\n    x       10.5\n  r under h\n"
        )
        assert text.render(sections[:1]) == "Nothing is wrong.\n"


class TestForm:
    @pytest.mark.parametrize("name", EVERY)
    def test_stands_alone(self, results, name):
        page = Page(html.page(results[name], pictures={"drawing": PICTURE}, version="1.2.3"))
        assert page.faults == []
        assert page.outside() == []
        assert page.dangling() == set()
        assert len(page.ids) == len(set(page.ids)) > 1
        assert page.source.startswith("<!DOCTYPE html>\n<html lang")
        assert page.title == (results[name].sheet.title or "Flowsheet")
        assert {page.tags[tag] for tag in ("html", "head", "title", "body", "h1", "main")} == {1}
        assert page.tags["style"] == 2  # that of the page and that of the picture
        assert page.tags["thead"] == page.tags["tbody"] == page.tags["table"] == len(page.tables)
        assert any("leanloop 1.2.3" in line for line in page.words)

    @pytest.mark.parametrize(("source", "part"), [
        ("<p><b></p>", "p closed where"),
        ("<p>", "p is not closed"),
        ('<p id="a" id="b"></p>', "id twice"),
        ("<table><thead><tr><th>a</th></tr></thead></table>", "scope"),
        ("<!-- a -->", "comment"),
    ])  # fmt: skip
    def test_a_bad_form_is_seen(self, source, part):
        assert any(part in fault for fault in Page(source).faults)

    @pytest.mark.parametrize("source", [
        '<a href="//host/x">', '<img src="x.png">', '<svg><image xlink:href="x.png"/></svg>', "<p onclick='x()'></p>",
        "<p>see http://example.org</p>", "<style>p { background: url(x.png) }</style>", "<style>@import 'x';</style>",
        "<script>x()</script>", '<svg xmlns="http://www.w3.org/2000/svg" href="https://example.org"></svg>',
    ])  # fmt: skip
    def test_what_leads_outside_is_seen(self, source):
        assert Page(source).outside()

    def test_a_name_space_leads_nowhere(self):
        assert Page('<svg xmlns="http://www.w3.org/2000/svg"><use href="#a"/></svg>').outside() == []
        assert Page('<svg><use href="#a"/></svg>').dangling() == {"a"}

    def test_contents_lead_to_every_section(self, results):
        page = Page(html.page(results["vent"], pictures={"drawing": PICTURE}))
        links = [value[1:] for tag, name, value in page.attributes if tag == "a" and name == "href"]
        heads = [value for tag, name, value in page.attributes if tag == "h2" and name == "id"]
        assert len(heads) == page.tags["h2"] > 8
        assert [link for link in links if link in heads][-len(heads) :] == heads

    def test_figures_stand_to_the_right_and_words_to_the_left(self, results):
        tables = {table.heading: table for table in Page(html.page(results["vent"])).tables}
        for row in tables["Streams, components in kmol/h"].classes:
            assert row[:2] == [None, None]
            assert set(row[2:]) == {"figure"}
        assert all(row == [None, None, "figure", "figure"] for row in tables["In the gases"].classes)
        (row,) = tables["Asked for"].classes
        assert row == [None, None, "figure", None, "figure", None, "figure", "figure"]

    def test_names_of_rows_stand_to_the_left_whatever_they_are(self):
        rows = [["1", "1.5", ">= 2 bar", "-"], ["2", "-1e-05", "+3 %", "gas"]]
        (table,) = Page(html.render("Title", [Section("Stages", [Table(["stage", "a", "b", "c"], rows)])])).tables
        assert [table.head_classes, *table.classes] == [[None, "figure", "figure", None]] * 3

    @pytest.mark.parametrize(("columns", "letters"), [(8, None), (11, None), (12, 8 + 11 * 12), (40, 8 + 39 * 12)])
    def test_a_broad_table_is_printed_across(self, columns, letters):
        table = Table([f"c{place}" for place in range(columns)], [["stream"] + ["1.2345e-05"] * (columns - 1)])
        narrow = Table(["name", "words"], [["a", "long words " * 40]])
        page = Page(html.render("Title", [Section("Narrow", [narrow]), Section("Flows", [narrow, table])]))
        kinds = [(name, value) for tag, name, value in page.attributes if tag == "section"]
        assert kinds == ([("class", "broad"), ("style", f"--letters: {letters}")] if letters else [])

    @pytest.mark.parametrize("name", EVERY)
    def test_tells_the_status_in_words(self, results, name):
        source = html.page(results[name])
        words = set(np.atleast_1d(results[name].status))
        assert words == {"converged", "out_of_reach"} if name == "batch" else len(words) == 1
        before = source.partition("<h2")[0]
        assert all(word in before for word in words)
        if name != "batch":
            kind = "status" if words == {"converged"} else "failure"
            assert f'<p class="{kind}"><strong>Status: {words.pop()}.</strong>' in before

    @pytest.mark.parametrize("name", EVERY)
    def test_cautions_stand_near_the_top_and_all_at_the_end(self, results, name):
        source, own = html.page(results[name]), results[name].cautions()
        assert bool(own) == (name in ("vent", "unreached", "batch"))
        before, end = (Page(source[slice(*cut)]).words for cut in ((0, source.index("<h2")), (source.rindex("<h2"), None)))
        assert [word for word in before if word in (*own, *html.CAUTIONS)] == [*own, html.CAUTIONS[0]]
        assert [word for word in end if word in (*own, *html.CAUTIONS)] == [*own, *html.CAUTIONS]

    def test_the_same_in_every_process(self):
        code = (
            "import leanloop\nfrom leanloop.output import html\n"
            f"print(html.page(leanloop.read({str(SCRUBBER)!r}).solve(), pictures={{'a': {PICTURE!r}}}))"
        )
        made = [
            subprocess.run([sys.executable, "-W", "error", "-c", code], capture_output=True, check=True, env=os.environ | {
                "PYTHONHASHSEED": seed, "PYTHONPATH": str(Path(leanloop.__file__).parents[1])}).stdout
            for seed in ("1", "2")
        ]  # fmt: skip
        assert made[0] == made[1] != b""


class TestHostile:
    def sheet(self, title):
        return leanloop.Flowsheet(
            title=title,
            components={"air": {"stays_in": "gas"}},
            feeds={"a": {"phase": "gas", "temperature": 300.0, "pressure": 1e5, "flows": {"air": 1.0}}},
            units={"join": {"kind": "mixer", "takes": ["a"], "gives": "c"}},
        )

    def test_title(self):
        page = Page(html.page(self.sheet(HOSTILE).solve()))
        assert page.title == HOSTILE
        assert HOSTILE in page.words  # as text
        assert page.faults == page.outside() == []

    def test_title_of_control_signs(self):
        source = html.page(self.sheet("a\x00b\u202e\nc\x1b[0m").solve())
        assert Page(source).title == "a b c [0m"
        assert all(sign.isprintable() or sign == "\n" for sign in source)

    def test_every_text_of_sections(self):
        sections = [
            Section("", [Sentence(HOSTILE, 0, "status"), Sentence(HOSTILE)]),
            Section(HOSTILE, [Sentence(HOSTILE), Listing([HOSTILE]), Table([HOSTILE] * 2, [[HOSTILE] * 2], HOSTILE)],
                    HOSTILE, HOSTILE),
        ]  # fmt: skip
        source = html.render(HOSTILE, sections, {HOSTILE: PICTURE, (HOSTILE, HOSTILE): PICTURE},
                             cautions=[HOSTILE], missing=HOSTILE, version=HOSTILE)  # fmt: skip
        page = Page(source)
        assert page.faults == page.outside() == []
        assert source.count("alert(1)") == "".join(page.words).count(HOSTILE) + 4 > 14  # title, and names of frame and pictures
        assert [value for _, name, value in page.attributes if name == "aria-label"].count(HOSTILE) == 3


class TestPictures:
    PLACES = {"all": PICTURE, ("units.wash", "steps"): PICTURE, ("loops.0", "window"): PICTURE, ("nowhere", "lost"): PICTURE,
              ("units.wash", "steps again"): PICTURE}  # fmt: skip

    def test_stand_once_each_in_their_places(self, results):
        page = Page(html.page(results["vent"], pictures=self.PLACES))
        assert page.tags["svg"] == page.tags["figure"] == page.tags["figcaption"] == 5
        wash = "Column wash (absorber)"
        assert [found.heading for found in page.figures] == ["Pictures", "Pictures", "Solvent loop", wash, wash]
        assert [word for word in page.words if word in ("all", "lost", "window", "steps", "steps again")] == [
            "all", "lost", "window", "steps", "steps again"]  # fmt: skip

    def test_of_extra_sections(self, results):
        extra = [Section("Least rates", [Table(["unit", "rate"], [["wash", "1.2"]])], place="limits")]
        page = Page(html.page(results["vent"], extra, {("limits", "pinch"): PICTURE}))
        (table,) = [table for table in page.tables if table.heading == "Least rates"]
        assert (table.head, table.rows) == (["unit", "rate"], [["wash", "1.2"]])
        assert [found.heading for found in page.figures] == ["Least rates"]
        assert page.source.index("Least rates</h2>") < page.source.index("Cautions</h2>")

    def test_of_a_place_that_two_sections_have(self):
        sections = [Section("First", [], place="limits"), Section("Second", [], place="limits")]
        page = Page(html.render("Title", sections, {("limits", "pinch"): PICTURE}))
        assert [found.heading for found in page.figures] == ["First"]

    def test_points_of_a_picture_stay(self):
        svg = '<svg xmlns="http://www.w3.org/2000/svg"><image href="data:image/png;base64,AAAA"/></svg>'
        assert 'href="data:image/png;base64,AAAA"' in content_svg.inline(svg, "p", "label")

    def test_identifiers_are_apart_and_lead_to_their_own(self):
        pictures = {"first": PICTURE, "second": PICTURE}
        page = Page(html.render("Twice", [], pictures))
        assert len(page.ids) == len(set(page.ids)) == 1 + 2 * 5
        assert page.dangling() == set()
        for number in (1, 2):
            own = page.source.split("<figure>")[number].partition("</figure>")[0]
            asked = re.findall(r'(?:url\(|href=")#([\w-]+)', own)
            assert asked == [f"picture-{number}-{name}" for name in ("shade", "clip", "shade", "mark")]

    def test_rules_are_for_their_picture(self):
        source = content_svg.inline(PICTURE, "p", "label")
        assert "#p * {stroke-linejoin: round}" in source
        assert "#p .a, #p .b {fill: url(#p-shade)}" in source

    def test_what_is_drawn_stays(self):
        source = content_svg.inline(PICTURE, "p", "a label")
        assert source.startswith("<svg ") and source.endswith("</svg>")
        for part in ('d="M 0 0 L 1 1"', 'viewBox="0 0 46 34"', ">a &lt; b &amp; c</text>", '<rect width="9"',
                     'aria-label="a label"', 'href="#p-mark"', 'clip-path="url(#p-clip)"', '"fill: url(#p-shade)"'):  # fmt: skip
            assert part in source, part
        assert "metadata" not in source and "http" not in source and "<!" not in source and "<?" not in source

    def test_what_runs_or_leads_outside_is_left_out(self):
        bad = (
            '<svg xmlns="http://www.w3.org/2000/svg" onload="x()"><script>x()</script><a href="javascript:x()"><rect/></a>'
            '<image href="http://example.org/a.png"/><rect fill="url(http://example.org/#a)"/><foreignObject><p/></foreignObject>'
            "<style>@import url(http://example.org/a.css); rect {fill: url(http://example.org/#b)}</style></svg>"
        )
        page = Page(content_svg.inline(bad, "p", "label"))
        assert page.faults == page.outside() == []
        assert (page.tags["rect"], page.tags["image"], page.tags["foreignobject"]) == (2, 1, 0)

    @pytest.mark.parametrize("source", ["", "words", "<svg>", "<html></html>", "<svg xmlns='http://www.w3.org/2000/svg'><g></svg>"])
    def test_what_is_no_picture_is_refused(self, source):
        with pytest.raises(ValueError, match="picture 'stairs' is no SVG"):
            html.render("Title", [], {"stairs": source})

    def test_missing_ones_are_told(self, results):
        sentence = "Pictures need the extra."
        page = Page(html.page(results["vent"], missing=sentence))
        assert sentence in page.words
        assert page.tags["svg"] == 0
        assert "Pictures" not in Page(html.page(results["vent"])).words
