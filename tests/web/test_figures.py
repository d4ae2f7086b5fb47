"""Figures as plain data that no text can break out of."""

from __future__ import annotations

import json

import pytest
from hypothesis import given
from hypothesis import strategies as st

from web.figures import Figure, json_block, plain


@given(
    st.recursive(
        st.text() | st.integers() | st.none(), lambda inner: st.lists(inner) | st.dictionaries(st.text(), inner)
    )
)
def test_a_data_block_reads_back_as_written_and_cannot_be_ended_from_inside(content: object) -> None:
    block = str(json_block(content))

    assert json.loads(block) == content
    assert not set("<>&\u2028\u2029") & set(block)


def test_a_number_that_is_none_cannot_pass_for_one_in_a_figure() -> None:
    with pytest.raises(ValueError, match="Out of range float values"):
        json_block({"y": [float("nan")]})


def test_tags_in_a_name_are_shown_and_not_obeyed() -> None:
    assert plain('<b>8 & 12</b> "orders"') == '&lt;b&gt;8 &amp; 12&lt;/b&gt; "orders"'


def test_a_figure_hands_its_height_on_with_its_layout() -> None:
    figure = Figure("lines", "Cell means", "cells", traces=[{"y": [1]}], layout={"xaxis": {}}, height=240)

    assert figure.content() == {"data": [{"y": [1]}], "layout": {"xaxis": {}, "height": 240}}
