"""Pieces of a report's page.  Every text goes through `escaped`; only what is made here is markup."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence

from opacity.check.result import AGREES, CANNOT_JUDGE, DIFFERS, CheckResult
from opacity.errors import printable
from opacity.pipeline.report_style import STYLE
from opacity.tables.svg import Picture, escaped

_SHAPES = {
    AGREES: '<circle cx="10" cy="10" r="8.5"/><path d="M5.5 10.5l3 3.2l6-7"/>',
    DIFFERS: '<path d="M1.5 1.5h17v17h-17z"/><path d="M5.5 5.5l9 9m0-9l-9 9"/>',
    CANNOT_JUDGE: '<path d="M10 1.5l8.5 16.5h-17z"/><path d="M10 7.5v5m0 2.2v1.6"/>',
}
"""A circle with a tick, a square with a cross, a triangle with an exclamation mark."""
_POLICY = "default-src 'none'; style-src 'unsafe-inline'"


def page(title: str, body: Iterable[str]) -> str:
    """A whole page that asks for nothing beyond itself."""
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{_POLICY}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>{escaped(title)}</title>\n<style>{STYLE}</style>\n</head>\n<body>\n"
        + "\n".join(body)
        + "\n</body>\n</html>\n"
    )


def words_of(text: str) -> str:
    """A text with its units kept whole at the ends of lines."""
    return re.sub(r"\bcm-1\b", '<span class="unit">cm-1</span>', escaped(text))


def article(name: str, parts: Iterable[str]) -> str:
    """What a page says of one table, to be found by its name."""
    return f'<article id="{escaped(name)}">\n' + "\n".join(parts) + "\n</article>"


def contents(found: Iterable[tuple[str, str, str, str]]) -> str:
    """Ways to the articles of a page: name, title, outcome and verdict of each."""
    items = (
        f'<li><a href="#{escaped(name)}">{escaped(title)}</a>: '
        f'<span class="{_class(outcome)}">{mark(outcome)}{escaped(verdict)}</span></li>'
        for name, title, outcome, verdict in found
    )
    return f"<nav><ul>{''.join(items)}</ul></nav>"


def heading(level: int, words: str) -> str:
    """A heading."""
    return f"<h{level}>{escaped(words)}</h{level}>"


def paragraph(words: str, kind: str = "") -> str:
    """A paragraph."""
    return f'<p class="{kind}">{escaped(words)}</p>' if kind else f"<p>{escaped(words)}</p>"


def mark(verdict: str) -> str:
    """The shape of a verdict, beside its word."""
    shape = _SHAPES.get(verdict, "")
    return f'<svg class="mark" viewBox="0 0 20 20" aria-hidden="true" focusable="false">{shape}</svg>'


def _class(verdict: str) -> str:
    return verdict.replace(" ", "-") if verdict in _SHAPES else ""


def verdict_line(outcome: str, words: str) -> str:
    """The sentence at the head of a table's report."""
    return f'<p class="verdict {_class(outcome)}">{mark(outcome)}{escaped(words)}</p>'


def results(rows: Sequence[CheckResult], caption: str) -> str:
    """The table of checks; on a narrow screen each row becomes a block."""
    body = []
    for row in rows:
        value = "" if row.value is None else f"{row.value:+.2e}"
        limit = "" if row.limit is None else f"{row.limit:.1e}"
        body.append(
            f'<tr><th scope="row">{escaped(row.check)}</th>'
            f'<td class="{_class(row.verdict)}"><span class="word">{mark(row.verdict)}'
            f"{escaped(row.verdict)}</span></td>"
            f'<td class="number" data-label="difference">{value}</td><td class="number" data-label="limit">{limit}</td>'
            f"<td>{words_of(row.detail)}</td></tr>"
        )
    head = '<th scope="col">check</th><th scope="col">verdict</th><th scope="col" class="number">difference</th>'
    head += '<th scope="col" class="number">limit</th><th scope="col">detail</th>'
    return _table(head, body, caption)


def columns(heads: Sequence[str], rows: Iterable[Sequence[str]], caption: str = "") -> str:
    """A table of texts, the first of each row its head."""
    head = "".join(f'<th scope="col">{escaped(one)}</th>' for one in heads)
    body = []
    for first, *others in rows:
        cells = "".join(
            f'<td data-label="{escaped(name)}">{escaped(one)}</td>' for name, one in zip(heads[1:], others, strict=True)
        )
        body.append(f'<tr><th scope="row">{escaped(first)}</th>{cells}</tr>')
    return _table(head, body, caption)


def _table(head: str, body: Sequence[str], caption: str) -> str:
    said = f"<caption>{escaped(caption)}</caption>" if caption else ""
    return f'<table class="stack">{said}<thead><tr>{head}</tr></thead><tbody>{"".join(body)}</tbody></table>'


def pairs(found: Iterable[tuple[str, str]]) -> str:
    """Words and their values."""
    return '<dl class="facts">' + "".join(f"<dt>{escaped(a)}</dt><dd>{words_of(b)}</dd>" for a, b in found) + "</dl>"


def listed(found: Iterable[str]) -> str:
    """A list of sentences."""
    return "<ul>" + "".join(f"<li>{words_of(one)}</li>" for one in found) + "</ul>"


def block(text: str) -> str:
    """A text as it stands, line by line, to be copied."""
    lines = "\n".join(printable(line.replace("\t", "    ")) for line in text.replace("\r\n", "\n").split("\n"))
    return f'<pre tabindex="0">{_lines(lines)}</pre>'


def _lines(text: str) -> str:
    # `escaped` would write the ends of lines as escapes.
    return "\n".join(escaped(line) for line in text.split("\n"))


def figure(picture: Picture) -> str:
    """A picture with its title and, for all readers, what is to be seen in it; all of its text is inside."""
    words = f"<strong>{escaped(picture.title)}.</strong> {escaped(picture.caption or picture.description)}"
    return (
        f'<figure><div class="picture" tabindex="0" role="group" aria-label="{escaped(picture.title)}">'
        f"{picture.svg()}</div><figcaption>{words}</figcaption></figure>"
    )
