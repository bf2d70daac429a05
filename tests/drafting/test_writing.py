"""Whatever a value holds, the study says it back."""

import tomllib

from hypothesis import given
from hypothesis import strategies as st

from reweight.drafting.writing import toml_value

TEXT = st.text(st.characters(exclude_categories=["Cs"]))  # half a pair is no text


@given(TEXT)
def test_any_text_survives(text):
    assert tomllib.loads(f"a = {toml_value(text)}  # said")["a"] == text


@given(TEXT)
def test_a_text_stays_on_its_line(text):
    assert toml_value(text).isprintable()


@given(st.floats(allow_nan=False) | st.integers(-(2**63), 2**63 - 1) | st.booleans())
def test_any_number_survives(number):
    found = tomllib.loads(f"a = {toml_value(number)}")["a"]

    assert (found, type(found)) == (number, type(number))
