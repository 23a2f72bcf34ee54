"""Fields of the request: what they take, and what they say of the rest."""

from __future__ import annotations

import math

import pytest
from marshmallow import ValidationError
from stagesum_schemas.fields import (
    ByName,
    ListOf,
    QuantityField,
    StrictBoolean,
    StrictInteger,
    StrictNumber,
    StrictText,
    UnitField,
    Word,
)
from stagesum_schemas.pointers import faults, member


def complaint(field, value) -> str:
    with pytest.raises(ValidationError) as caught:
        field.deserialize(value)
    return caught.value.messages[0]


def test_a_quantity_is_a_text_or_a_plain_number():
    field = QuantityField("")
    written = field.deserialize("150 uV")
    assert (written.value, written.unit.symbol, written.text) == (150.0, "uV", "150 uV")
    plain = field.deserialize(3)
    assert (plain.value, plain.unit, plain.text) == (3.0, None, "3")


@pytest.mark.parametrize("value", [True, False, None, [], {}, math.nan, math.inf, 10**400, "", "uV", "1,5 mV"])
def test_what_is_no_quantity_is_refused(value):
    assert complaint(QuantityField(""), value).startswith("found ")


@pytest.mark.parametrize("value", ["3", "1_0", "٣", True, None, math.nan, math.inf, -math.inf, 10**400, [1]])
def test_a_number_is_not_guessed_from_something_else(value):
    """General-purpose readers take "1_0" and Arabic digits for numbers, and true for 1."""
    assert "; write a number" in complaint(StrictNumber(""), value)


@pytest.mark.parametrize("value", ["3", 3.0, 3.7, True, None])
def test_an_integer_is_an_integer(value):
    assert "; write an integer" in complaint(StrictInteger(""), value)


@pytest.mark.parametrize("value", [0, 1, "true", "yes", None])
def test_a_boolean_is_true_or_false(value):
    assert "; write true or false" in complaint(StrictBoolean(""), value)


@pytest.mark.parametrize(
    ("low", "high", "inside", "words"),
    [
        (0, 1, (True, True), "write a number from 0 to 1"),
        (0, 1, (False, False), "write a number above 0 and below 1"),
        (0, 10, (False, True), "write a number above 0 and at most 10"),
        (0, None, (False, True), "write a number above 0"),
    ],
)
def test_a_range_is_told_in_words(low, high, inside, words):
    field = StrictNumber("", low, high, inside=inside)
    assert complaint(field, -1).endswith(words)
    assert (field.right, field.deserialize(0.5)) == (words, 0.5)


def test_open_ends_do_not_belong_to_the_range():
    field = StrictNumber("", 0, 1, inside=(False, True))
    assert field.deserialize(1) == 1.0
    assert complaint(field, 0) == "found 0.0; write a number above 0 and at most 1"


@pytest.mark.parametrize("value", ["", "x" * 11, "a\nb", "a\x00", "a\x7f", "\ud800", "a/b", 5])
def test_text_is_bounded_and_can_be_printed(value):
    assert complaint(StrictText("", 1, 10, without="/"), value).startswith("found ")


def test_text_keeps_what_people_write():
    assert StrictText("", 1, 20).deserialize("Zähler Nº 1 💧") == "Zähler Nº 1 💧"


def test_a_long_value_is_repeated_in_part_only():
    assert len(complaint(StrictText("", 1, 10), "x" * 10**6)) < 150


@pytest.mark.parametrize(
    ("field", "value"),
    [
        (StrictText("", 1, 10), "\ud800" * 1000),
        (StrictText("", 1, 1000), "\x00" * 1000),
        (StrictInteger("", 0, 10), 10**300),
        (StrictInteger(""), 10**5000),
        (StrictNumber(""), -(10**5000)),
        (QuantityField(""), 10**5000),
    ],
    ids=["surrogates", "controls", "out of range", "long integer", "long number", "long quantity"],
)
def test_a_message_stays_short_whatever_was_found(field, value):
    """Escapes are longer than what they stand for, and Python refuses to write out more than 4300 digits."""
    said = complaint(field, value)
    assert said.startswith("found ")
    assert len(said) < 150


def test_a_misspelt_word_gets_the_nearest():
    said = complaint(Word("", ("worst_case", "rss")), "worstcase")
    assert said == "found 'worstcase'; write one of worst_case, rss; did you mean worst_case?"


def test_a_list_is_measured_before_its_items_are_read():
    said = complaint(ListOf("", StrictNumber(""), 2, 2), ["a"] * 5)
    assert said == "found a list of 5; write a list of exactly 2"


def test_a_unit_that_is_an_expression_is_refused():
    assert "'V+V'" in complaint(UnitField(""), "V+V")


def test_faults_under_chosen_names_keep_the_name():
    with pytest.raises(ValidationError) as caught:
        ByName("", StrictNumber(""), 5).deserialize({"a": "x", "b": 1})
    assert set(caught.value.messages) == {"a"}


@pytest.mark.parametrize(
    ("name", "written"),
    [  # RFC 6901, section 6: the examples for URI fragments
        ("a/b", "a~1b"),
        ("c%d", "c%25d"),
        ("e^f", "e%5Ef"),
        ("g|h", "g%7Ch"),
        ("i\\j", "i%5Cj"),
        ('k"l', "k%22l"),
        (" ", "%20"),
        ("m~n", "m~0n"),
        ("~1", "~01"),
    ],
)
def test_names_are_escaped_as_in_rfc_6901(name, written):
    assert member(name) == written


def test_what_is_missing_is_pointed_at_by_its_parent():
    found = faults({"a": {0: {"b": ["missing"]}}, "c": ["missing too"]}, {"a": [{}]})
    assert [(fault.pointer, fault.detail) for fault in found] == [("#/a/0", "missing"), ("#", "missing too")]
