"""The loop for long lists sets ready parts in place and reads nothing else as a place."""

from __future__ import annotations

from dataclasses import dataclass

import pytest
from django.template import Context, Template, TemplateSyntaxError


@dataclass
class Row:
    number: str
    mark: str = "<i>m</i>"


def rendered(text: str, *rows: Row) -> str:
    return Template("{% load ready_rows %}" + text).render(Context({"rows": rows}))


def test_each_row_is_set_in_place_as_it_is() -> None:
    text = "{% each row in rows %}<td>{row.number}</td><td>{row.mark}</td>{% endeach %}"
    assert rendered(text, Row("A"), Row("B")) == "<td>A</td><td><i>m</i></td><td>B</td><td><i>m</i></td>"


def test_braces_that_a_person_typed_stay_braces() -> None:
    assert rendered("{% each row in rows %}{row.number}{% endeach %}", Row("{row.mark}")) == "{row.mark}"


@pytest.mark.parametrize(
    "text",
    [
        "{% each row in rows %}{{ asked }}{% endeach %}",
        "{% each row in rows %}{% if rows %}{row.number}{% endif %}{% endeach %}",
        "{% each row of rows %}{row.number}{% endeach %}",
        "{% each rows %}{row.number}{% endeach %}",
    ],
)
def test_anything_but_text_between_the_tags_is_refused(text: str) -> None:
    with pytest.raises(TemplateSyntaxError):
        rendered(text)
