"""An explanation in a notebook: a few lines that take the colours of whatever surrounds them."""

from __future__ import annotations

from ...pages.markup import text
from ..explanation import Explanation
from . import words

#: Colours are inherited, so that the lines can be read on light and on dark ground alike.
STYLE = """<style>
.latpath-told { border-left: 4px solid currentColor; padding: .2em 0 .2em .9em; max-width: 46em; }
.latpath-told p { margin: .3em 0; overflow-wrap: anywhere; }
.latpath-told dl { display: grid; grid-template-columns: max-content minmax(0, 1fr);
  gap: .2em 1em; margin: .4em 0; }
.latpath-told dt { font-weight: 600; }
.latpath-told dd { margin: 0; overflow-wrap: anywhere; }
</style>"""


def to_notebook(told: Explanation) -> str:
    """Return the answer in short as a piece of HTML with styles of its own.

    Examples
    --------
    >>> from pyomo_latpath.explain.explain import explain
    >>> from pyomo_latpath.forms.linear_form import LinearForm
    >>> caves = LinearForm.from_arrays([[1, 1]], row_lower=1, row_upper=1, col_lower=0,
    ...                                col_upper=1, cost=[5, 3])
    >>> "<dt>rests on</dt>" in to_notebook(explain(caves))
    True
    """
    entries = "".join(
        f"<dt>{title}</dt><dd>{text(sentence)}</dd>" for title, sentence in words.in_short(told)
    )
    return (
        f'{STYLE}<div class="latpath-told"><p><strong>{text(words.headline(told))}</strong></p>'
        f"<dl>{entries}</dl></div>"
    )
