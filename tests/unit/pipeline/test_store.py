"""Results on disk: whole or absent."""

from __future__ import annotations

import os
import stat
from pathlib import Path

import numpy as np
import pytest

from topovet.pipeline.codec import Codec
from topovet.pipeline.store import Store, StoreError, write_atomically


def test_result_comes_back_under_its_key_only(tmp_path: Path) -> None:
    store = Store(tmp_path / "tasks", Codec(()))
    store.save("gap", "ab" * 32, (1, 2))
    assert store.load("gap", "ab" * 32) == (True, (1, 2))
    assert store.load("gap", "cd" * 32) == (False, None)
    # same beginning of the key, hence the same file, but another key
    assert store.load("gap", "ab" * 31 + "cd") == (False, None)


def test_damaged_file_counts_as_absent(tmp_path: Path) -> None:
    store = Store(tmp_path, Codec(()))
    store.save("gap", "k" * 64, 1)
    path = store.path("gap", "k" * 64)
    path.write_bytes(path.read_bytes()[:-5])
    assert store.load("gap", "k" * 64) == (False, None)


def test_write_replaces_and_leaves_nothing_behind(tmp_path: Path) -> None:
    target = tmp_path / "deep" / "verdict.json"
    write_atomically(target, b"old")
    write_atomically(target, b"new")
    assert target.read_bytes() == b"new"
    assert [p.name for p in target.parent.iterdir()] == ["verdict.json"]


def test_impossible_place_is_one_sentence(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(StoreError, match="cannot be written"):
        write_atomically(tmp_path / "file" / "verdict.json", b"x")


def test_failed_write_keeps_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    target = tmp_path / "verdict.json"
    write_atomically(target, b"old")

    def full(descriptor: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("os.fsync", full)
    with pytest.raises(StoreError, match="No space left on device"):
        write_atomically(target, b"new")
    assert target.read_bytes() == b"old"
    assert [p.name for p in tmp_path.iterdir()] == ["verdict.json"]


def test_an_interrupted_write_leaves_nothing_behind(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def interrupted(descriptor: int) -> None:
        raise SystemExit(143)

    monkeypatch.setattr("os.fsync", interrupted)
    with pytest.raises(SystemExit):
        write_atomically(tmp_path / "verdict.json", b"new")
    assert not list(tmp_path.iterdir())


def test_what_must_outlast_a_loss_of_power_is_synced_with_its_name(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    synced: list[bool] = []
    monkeypatch.setattr("os.fsync", lambda handle: synced.append(stat.S_ISDIR(os.fstat(handle)[0])))
    write_atomically(tmp_path / "verdict.json", b"x")
    assert synced == [False, True]
    write_atomically(tmp_path / "task.npz", b"x", durable=False)
    assert synced == [False, True]


def test_any_damage_to_a_stored_result_is_noticed(tmp_path: Path) -> None:
    """What a loss of power can leave: zeros, a part, single bytes that differ."""
    store = Store(tmp_path, Codec(()))
    value = {"energies": np.arange(40.0), "text": "x" * 300}
    store.save("gap", "k" * 64, value)
    path = store.path("gap", "k" * 64)
    whole = path.read_bytes()
    spoilt = [bytes(len(whole)), *(whole[:n] for n in range(0, len(whole), 11))]
    spoilt += [
        whole[:i] + bytes([whole[i] ^ flip]) + whole[i + 1 :]
        for i in range(0, len(whole), 3)
        for flip in (0x01, 0x80, 0xFF)
    ]
    for data in spoilt:
        path.write_bytes(data)
        found, back = store.load("gap", "k" * 64)
        # bytes that mean nothing (times in the archive) may differ without harm
        assert not found or (
            back["text"] == value["text"] and np.array_equal(back["energies"], value["energies"])
        )
