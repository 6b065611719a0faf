"""Reports as one HTML file that stands alone and can be printed."""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from html import escape
from typing import TYPE_CHECKING

from leanloop.output.content import Listing, Part, Section, Sentence, Table, printable
from leanloop.output.content_report import CAUTIONS, report_sections, report_title
from leanloop.output.content_style import STYLE
from leanloop.output.content_svg import inline

if TYPE_CHECKING:
    from leanloop.flowsheet.result import Result

Key = str | tuple[str, str]
UPRIGHT = 130  # letters that fit across a printed page; a broader table is printed on the page's side
JOINT = re.compile(r"(?<=[A-Za-z_]\.)(?=[A-Za-z_])")  # where an address may be broken
WHOLE = 20  # rows of a table that is not parted between pages
FIGURE = re.compile(r"([<>]?= )?[-+]?\d[\d.]*(e[-+]\d+)?( \S+)?|-")  # a number, with a relation or a unit; or the dash


def page(
    result: Result,
    extra_sections: Iterable[Section] = (),
    pictures: Mapping[Key, str] | None = None,
    missing: str = "",
    version: str = "",
) -> str:
    """Write the report of a solve as a page.

    Parameters
    ----------
    result : Result
        Of one case; of many, their statuses are counted.
    extra_sections : iterable of Section
        Stand behind the report's own, before the cautions.
    pictures : mapping of str, or (str, str), to str
        SVG by caption, or by place and caption, in the order in which they appear; see `render`. Places of a report:
        ``"requirements"``, ``"loops.0"`` and on, ``"units.NAME"`` of a column, ``"streams"``, ``"gases"``,
        ``"balance"``, and those of the extra sections.
    missing : str
        A sentence that tells why there are no pictures.
    version : str
        Of leanloop, told at the end.

    Returns
    -------
    str
        The same for the same arguments.

    Raises
    ------
    ValueError
        Where a picture is no SVG.
    """
    *own, last = report_sections(result)
    sections = [*own, *extra_sections, last]
    cautions = [*result.cautions(), CAUTIONS[0]]
    return render(report_title(result.sheet), sections, pictures, cautions=cautions, missing=missing, version=version)


def render(
    title: str,
    sections: Sequence[Section],
    pictures: Mapping[Key, str] | None = None,
    *,
    cautions: Sequence[str] = (),
    missing: str = "",
    version: str = "",
) -> str:
    """Set sections as a page, with pictures among them.

    Parameters
    ----------
    title : str
    sections : sequence of Section
        Those without a title stand first, above the contents.
    pictures : mapping of str, or (str, str), to str
        SVG of each picture. The key is its caption, or its place and its caption. A picture with a place stands at the
        end of the first section with that place; one without, or with a place that no section has, below the contents.
    cautions : sequence of str
        Those to be seen first, in a frame near the top; the section with the place ``"cautions"`` is named for the rest.
    missing : str
        A sentence that stands where pictures without a place would.
    version : str
        Of leanloop, told at the end; empty for none.

    Returns
    -------
    str
        Without scripts and without references outside itself.

    Raises
    ------
    ValueError
        Where a picture is no SVG.
    """
    kept = {section.place: number for number, section in reversed(list(enumerate(sections))) if section.place}
    figures: dict[int | None, list[str]] = {}
    for number, (key, svg) in enumerate((pictures or {}).items(), start=1):
        place, caption = key if isinstance(key, tuple) else ("", key)
        figures.setdefault(kept.get(place), []).append(_figure(svg, f"picture-{number}", caption))
    top, contents, body = [], [], []
    for number, section in enumerate(sections):
        own = [*(_part(part, section.title) for part in section.parts), *figures.get(number, ())]
        if not section.title:
            top += ([f"<p>{_text(section.detail)}</p>"] if section.detail else []) + own
            continue
        anchor = f"section-{number}"
        contents.append(f'<li><a href="#{anchor}">{_text(section.title)}</a></li>')
        body += [f"<section{_across(section)}>", f'<h2 id="{anchor}">{_text(section.title)}</h2>']
        body += ([f"<p>{_text(section.detail)}</p>"] if section.detail else []) + [*own, "</section>"]
    drawn = ([f"<p>{_text(missing)}</p>"] if missing else []) + figures.get(None, [])
    if drawn:
        contents.insert(0, '<li><a href="#pictures">Pictures</a></li>')
        body[:0] = ["<section>", '<h2 id="pictures">Pictures</h2>', *drawn, "</section>"]
    if cautions:
        top += _cautions(cautions, kept.get("cautions"))
    if len(contents) > 1:
        top += ['<nav aria-label="Contents">', "<ul>", *contents, "</ul>", "</nav>"]
    return "\n".join([*_head(title), *top, *body, *_foot(version)]) + "\n"


def _head(title: str) -> list[str]:
    shown = _text(title)
    return [
        "<!DOCTYPE html>",
        '<html lang="en">',
        "<head>",
        '<meta charset="utf-8">',
        '<meta name="viewport" content="width=device-width, initial-scale=1">',
        f"<title>{shown}</title>",
        f"<style>{STYLE}</style>",
        "</head>",
        "<body>",
        f"<header>\n<h1>{shown}</h1>\n</header>",
        "<main>",
    ]


def _foot(version: str) -> list[str]:
    words = "A dash stands for what is not defined or was not calculated."
    made = f" Written by leanloop {_text(version)}." if version else ""
    return ["</main>", f"<footer>\n<p>{words}{made}</p>\n</footer>", "</body>", "</html>"]


def _text(text: str) -> str:
    """Write any text, whoever chose it, as nothing but text."""
    return escape(printable(text))


def _cautions(cautions: Sequence[str], number: int | None) -> list[str]:
    rest = f'\n<p><a href="#section-{number}">All cautions</a></p>' if number is not None else ""
    return [f"<aside>\n<p><strong>Caution</strong></p>\n{_part(Listing(cautions), '')}{rest}\n</aside>"]


def _figure(svg: str, name: str, caption: str) -> str:
    return f"<figure>\n{inline(svg, name, printable(caption))}\n<figcaption>{_text(caption)}</figcaption>\n</figure>"


def _part(part: Part, title: str) -> str:
    if isinstance(part, Sentence):
        if part.kind == "plain":
            return f"<p>{_text(part.text)}</p>"
        word, stop, rest = part.text.partition(". ")
        return f'<p class="{escape(part.kind)}"><strong>{_text(word + stop)}</strong> {_text(rest)}</p>'
    if isinstance(part, Listing):
        return "\n".join(["<ul>", *(f"<li>{_text(item)}</li>" for item in part.items), "</ul>"])
    return _table(part, title)


def _right(table: Table) -> list[bool]:
    """Tell which columns hold figures alone, which stand to the right."""
    return [place > 0 and all(FIGURE.fullmatch(row[place]) for row in table.rows) for place in range(len(table.head))]


def _across(section: Section) -> str:
    """Tell how a section is printed, by its widest table: upright, or on the page's side in print that fits."""
    width = max((_width(part) for part in section.parts if isinstance(part, Table)), default=0)
    return f' class="broad" style="--letters: {width}"' if width > UPRIGHT else ""


def _width(table: Table) -> int:
    """Give the least width of a table in letters: words may be parted, names of rows and figures not."""
    width = 0
    for place, right in enumerate(_right(table)):
        pieces = table.head[place].split()
        for row in table.rows:
            pieces += [row[place]] if right or place == 0 else JOINT.sub(" ", row[place]).split()
        width += 2 + max(map(len, pieces), default=0)
    return width


def _table(table: Table, title: str) -> str:
    """Set a table; figures stand to the right, words to the left, in each column by its cells."""
    sides = [' class="figure"' if right else "" for right in _right(table)]
    label = _text(table.caption or title or table.head[0])
    # a region that scrolls can be reached with the keyboard, and says what it is
    whole = " whole" if len(table.rows) <= WHOLE else ""
    out = [f'<div class="frame{whole}" role="region" tabindex="0" aria-label="{label}">', "<table>"]
    if table.caption:
        out.append(f"<caption>{_text(table.caption)}</caption>")
    head = "".join(f'<th scope="col"{side}>{_text(cell)}</th>' for cell, side in zip(table.head, sides, strict=True))
    out += ["<thead>", f"<tr>{head}</tr>", "</thead>", "<tbody>"]
    for row in table.rows:
        cells = [f"<td{side}>{JOINT.sub('<wbr>', _text(cell))}</td>" for cell, side in zip(row[1:], sides[1:], strict=True)]
        out.append(f'<tr><th scope="row">{_text(row[0])}</th>{"".join(cells)}</tr>')
    return "\n".join([*out, "</tbody>", "</table>", "</div>"])
