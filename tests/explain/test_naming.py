"""Names in sentences: short lists that count what they do not show."""

from hypothesis import given
from hypothesis import strategies as st

from pyomo_latpath.explain.naming import listed, quoted


@given(st.lists(st.text(min_size=1), min_size=1, max_size=9), st.integers(1, 9))
def test_a_list_counts_what_it_does_not_show(names, most):
    told = listed(names, most)
    assert told.startswith(quoted(names[0]))
    assert told.endswith(" more") or len(names) <= most or names[-1].endswith(" more")
