"""Readers by name, in this process; those of packages are tried in processes of their own, with the workers."""

import pytest

from spikeward.parsers.delimited import READER
from spikeward.parsers.registry import formats, origin, reader_for
from spikeward.rules.records import Unreadable


def test_the_built_in_reader_is_found_and_has_no_origin_of_its_own():
    assert reader_for("delimited") is READER
    assert "delimited" in formats()
    assert origin("delimited") == ""


def test_an_unknown_name_is_a_sentence():
    with pytest.raises(Unreadable, match="no reader is called 'delimitted'; installed are .*delimited"):
        reader_for("delimitted")
    assert origin("delimitted") == ""
