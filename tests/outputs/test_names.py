"""Any name that a client may give becomes one plain path component, and its own."""

from pathlib import PurePath

import pytest
from hypothesis import given
from hypothesis import strategies as st

from workers.outputs.names import file_name

names = st.text(min_size=1, max_size=80).filter(lambda s: s.isprintable())


@pytest.mark.parametrize("name", ["lift x 1.5", "case (2), +10 %"[:12], "A_1-b.c=d#4"])
def test_everyday_names_are_kept(name):
    assert file_name(name) == name


@given(names)
def test_a_name_is_one_path_component_that_file_systems_take(name):
    """255 bytes is the limit of common file systems; the suffix needs a few."""
    found = file_name(name)
    assert PurePath(found).name == found
    assert found not in (".", "..")
    assert len(found.encode()) <= 240


@given(names, names)
def test_different_names_go_to_different_files(one, other):
    assert (file_name(one) == file_name(other)) == (one == other)


def test_long_names_that_share_their_beginning_differ():
    start = "длинное имя " * 6
    assert file_name(start + "ж") != file_name(start + "ю")
    assert len(file_name(start + "ж")) <= 200


@pytest.mark.parametrize("name", ["..", "../../etc/passwd", "a/b", "a\\b", ".hidden"])
def test_no_name_leads_out_of_its_folder(name):
    found = file_name(name)
    assert "/" not in found
    assert "\\" not in found
    assert not found.startswith(".")


def test_an_empty_name_is_refused():
    with pytest.raises(ValueError, match="empty"):
        file_name("")
