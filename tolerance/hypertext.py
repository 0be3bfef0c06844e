"""Results as small tables of HTML, for notebooks. Plain: a notebook gives it its own looks."""

from __future__ import annotations

from collections.abc import Sequence
from html import escape


def hypertext(title: str, sentences: Sequence[str], headings: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """Title, sentences and a table; every text is escaped. ValueError where a row is not as long as the headings.

    The first column stands on the left, the others, numbers and short words, on the right.
    """
    if any(len(row) != len(headings) for row in rows):
        raise ValueError("a row does not have as many cells as there are headings")
    head = "".join(f"<th{_side(number)}>{escape(text)}</th>" for number, text in enumerate(headings))
    body = "".join(f"<tr>{''.join(f'<td{_side(number)}>{escape(text)}</td>' for number, text in enumerate(row))}</tr>"
                   for row in rows)
    said = "".join(f"<p>{escape(sentence)}</p>" for sentence in sentences)
    return (f"<div><h4>{escape(title)}</h4>{said}"
            f"<table><thead><tr>{head}</tr></thead><tbody>{body}</tbody></table></div>")


def _side(number: int) -> str:
    return f' style="text-align:{"left" if number == 0 else "right"}"'
