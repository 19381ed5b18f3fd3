"""The part of the zone that is covered holds an image of every k, and little more."""

from __future__ import annotations

import numpy as np
import pytest

from topovet.arrays import FloatArray, IntArray
from topovet.spectrum.proof.boxes import Boxes, joined, split, whole
from topovet.spectrum.proof.zone import choose_region

IDENTITY = np.eye(3, dtype=np.int64)


def _generated(*matrices: IntArray) -> IntArray:
    group = {IDENTITY.tobytes(): IDENTITY}
    while True:
        more = {(a @ b).tobytes(): a @ b for a in group.values() for b in matrices}
        if more.keys() <= group.keys():
            return np.array(list(group.values()))
        group |= more


def _in_cell(cell: FloatArray, rotation: FloatArray) -> IntArray:
    """A Cartesian rotation as it acts on fractional k: k' = k @ image."""
    reciprocal = np.linalg.inv(cell).T
    image = reciprocal @ rotation.T @ np.linalg.inv(reciprocal)
    assert np.abs(image - np.round(image)).max() < 1e-9
    return np.round(image).astype(np.int64)


FCC = 2.0 * np.array([[0.0, 1, 1], [1, 0, 1], [1, 1, 0]])
HEXAGONAL = np.array([[3.0, 0, 0], [-1.5, 1.5 * np.sqrt(3), 0], [0, 0, 7.0]])
TURN_Z, TURN_111 = (
    np.array([[0.0, -1, 0], [1, 0, 0], [0, 0, 1]]),
    np.array([[0.0, 0, 1], [1, 0, 0], [0, 1, 0]]),
)
HALF, ROOT = 0.5, np.sqrt(3) / 2
SIXTH = np.array([[HALF, -ROOT, 0], [ROOT, HALF, 0], [0, 0, 1]])
SKEWED = np.array([[1, 0, 0], [3, 1, 0], [-2, 4, 1]]) @ FCC
OBLIQUE = np.array([[3.0, 0.2, 0.1], [-1.0, 3.5, 0.0], [0.4, 0.9, 4.0]])
CASES = {
    "none": (OBLIQUE, IDENTITY[None], (True, True, True), 1),
    "reversal": (OBLIQUE, _generated(-IDENTITY), (True, True, True), 2),
    "cubic": (
        FCC,
        _generated(_in_cell(FCC, TURN_Z), _in_cell(FCC, TURN_111), -IDENTITY),
        (True, True, True),
        48,
    ),
    "skewed": (
        SKEWED,
        _generated(_in_cell(SKEWED, TURN_Z), _in_cell(SKEWED, TURN_111), -IDENTITY),
        (True, True, True),
        48,
    ),
    "hexagonal": (
        HEXAGONAL,
        _generated(_in_cell(HEXAGONAL, SIXTH), -IDENTITY),
        (True, True, True),
        12,
    ),
    "layer": (HEXAGONAL, _generated(_in_cell(HEXAGONAL, SIXTH)), (True, True, False), 6),
    "wire": (HEXAGONAL, _generated(-IDENTITY), (False, False, True), 2),
}


@pytest.mark.parametrize("name", CASES)
def test_every_k_has_one_image(name: str) -> None:
    cell, images, periodic, order = CASES[name]
    assert len(images) == order
    region = choose_region(images, 2 * np.pi * np.linalg.inv(cell).T, periodic)
    used = np.flatnonzero(periodic)
    k = np.random.default_rng(0).random((200, 3)) * np.array(periodic)
    reciprocal = np.linalg.inv(cell).T
    short = np.linalg.inv(FCC).T if name == "skewed" else reciprocal
    to_short = reciprocal @ np.linalg.inv(short)
    shifts = np.array(list(np.ndindex((7,) * len(used)))) - 3
    cells = np.zeros((len(shifts), 3))
    cells[:, used] = shifts
    moved = k @ images @ to_short
    candidates = ((moved - np.round(moved))[:, :, None, :] + cells) @ np.linalg.inv(to_short)
    u = (candidates - region.origin) @ np.linalg.pinv(region.axes)
    beyond = (u @ region.normals.T - region.offsets).max(axis=-1)
    n_images = np.sum(beyond < 1e-9, axis=(0, 2))
    assert n_images.min() >= 1
    assert n_images.mean() == pytest.approx(1.0, abs=0.02)
    inside = u[beyond < 1e-9]
    assert inside.min() > 0
    assert inside.max() < 1


@pytest.mark.parametrize("name", ["cubic", "layer", "reversal"])
def test_no_box_that_touches_is_left_out(name: str) -> None:
    cell, images, periodic, _ = CASES[name]
    region = choose_region(images, 2 * np.pi * np.linalg.inv(cell).T, periodic)
    boxes, d = whole(len(region.axes)), len(region.axes)
    for _ in range(9):
        losses = np.random.default_rng(len(boxes)).random((len(boxes), 3, d))
        boxes = split(boxes, losses, np.full(len(boxes), np.inf))
        boxes = boxes.only(region.may_hold(boxes))
    u = np.random.default_rng(1).random((3000, d))
    u = u[np.all(u @ region.normals.T <= region.offsets, axis=1)]
    off = np.abs(u[:, None] - boxes.centres) - boxes.half_widths
    assert np.all((off <= 0).all(axis=2).any(axis=1))


def test_parts_fill_the_box_once() -> None:
    rng = np.random.default_rng(2)
    boxes = whole(3)
    for _ in range(4):
        chosen = rng.random(len(boxes)) < 0.7
        losses = rng.random((int(chosen.sum()), 3, 3))
        parts = split(boxes.only(chosen), losses, rng.random(int(chosen.sum())))
        boxes = joined([boxes.only(~chosen), parts])
    volumes = np.prod(2 * boxes.half_widths, axis=1)
    assert volumes.sum() == pytest.approx(1.0)
    u = rng.random((200, 3))
    inside = np.all(np.abs(u[:, None] - boxes.centres) <= boxes.half_widths, axis=2)
    assert np.all(inside.sum(axis=1) == 1)


def test_the_loosest_axis_is_split() -> None:
    losses = np.zeros((1, 3, 3))
    losses[0, 0] = [0.1, 5.0, 0.2]
    parts: Boxes = split(whole(3), losses, np.array([np.inf]))
    assert parts.levels.tolist() == [[0, 1, 0], [0, 1, 0]]
