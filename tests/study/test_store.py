"""Pieces on disk: whole or not at all, keyed by content, under names every system takes."""

from dataclasses import dataclass

import numpy as np
import pytest

from yieldsim.errors import PlaceError
from yieldsim.study import store


@dataclass(frozen=True)
class Thing:
    name: str
    values: np.ndarray


def test_fingerprint_follows_content():
    one = store.fingerprint(Thing("a", np.arange(3.0)), {"x": 1, "y": (2.0, None)})
    assert one == store.fingerprint(Thing("a", np.arange(3.0)), {"y": (2.0, None), "x": 1})
    assert one != store.fingerprint(Thing("a", np.array([0.0, 1.0, 2.0000000001])), {"x": 1, "y": (2.0, None)})
    assert store.fingerprint("1") != store.fingerprint(1)
    assert store.fingerprint(("a", "b")) != store.fingerprint(("ab",))
    assert store.fingerprint(frozenset({"b", "a"})) == store.fingerprint(frozenset({"a", "b"}))


def test_fingerprint_refuses_what_it_cannot_read():
    with pytest.raises(TypeError, match="no fingerprint"):
        store.fingerprint(object())


@pytest.mark.parametrize("name", ["Saltmarsh Point", "Åre", "東京", "a.b-c"])
def test_plain_names_stay(name):
    assert store.file_stem(name) == name


@pytest.mark.parametrize(
    "name", ["a/b", "..", "<script>", "CON", "x" * 300, "ends with dot.", "tab\there", "\u202eabc", "nul.txt"]
)
def test_hostile_names_are_made_safe(name):
    stem = store.file_stem(name)
    assert stem
    assert "/" not in stem
    assert stem not in (".", "..")
    assert len(stem.encode()) <= 100
    assert stem == store.file_stem(name)


def test_two_names_never_share_a_file():
    names = ["a/b", "a_b", "a\\b", "a?b", "x" * 100, "x" * 101]
    assert len({store.file_stem(name) for name in names}) == len(names)


def test_a_file_is_whole_or_not_there(tmp_path):
    target = tmp_path / "deep" / "file.txt"

    def half_written():
        with store.whole_file(target) as temporary:
            temporary.write_text("half")
            raise RuntimeError("stopped")

    with pytest.raises(RuntimeError, match="stopped"):
        half_written()
    assert list(target.parent.iterdir()) == []
    store.write_text(target, "whole\n")
    assert target.read_bytes() == b"whole\n"


def test_a_folder_that_cannot_be_made_is_said(tmp_path):
    (tmp_path / "file").write_text("x")
    with pytest.raises(PlaceError, match="cannot make the folder"):
        store.write_text(tmp_path / "file" / "inside.txt", "x")


def test_pieces_are_taken_only_when_whole(tmp_path):
    file = tmp_path / "hourly" / "here.nc"
    store.write_text(file, "content")
    store.write_piece(tmp_path, "here", "key", {"annual": [{"x": 0.1 + 0.2}]}, [file])
    assert store.read_piece(tmp_path, "here", "key") == {"annual": [{"x": 0.1 + 0.2}]}
    assert store.read_piece(tmp_path, "here", "other key") is None
    assert store.read_piece(tmp_path, "there", "key") is None
    file.write_text("cut")
    assert store.read_piece(tmp_path, "here", "key") is None
    store.write_text(tmp_path / store.PIECES / "here.json", "{not json")
    assert store.read_piece(tmp_path, "here", "key") is None
