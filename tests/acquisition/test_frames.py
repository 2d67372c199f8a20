"""Frames: what is kept, in which type, and what is refused."""

import numpy as np
import pytest

from recon.acquisition import Frames
from recon.errors import InputError


@pytest.fixture(params=[1, 2])
def stack(request):
    return np.random.default_rng(request.param).integers(0, 9, (7, 4, 5))


@pytest.mark.parametrize("dtype", [np.uint8, np.int8, np.uint16, np.int16, np.uint32, np.int32])
def test_small_integer_types_are_kept(stack, dtype):
    frames = Frames(stack.astype(dtype), 0.1)
    assert frames.counts.dtype == dtype
    np.testing.assert_array_equal(frames.counts, stack)


@pytest.mark.parametrize(("largest", "kept"), [(255, np.uint8), (256, np.uint16), (2**20, np.uint32)])
@pytest.mark.parametrize("given", [np.int64, np.uint64, np.float32, np.float64])
def test_wide_types_take_the_smallest_that_holds_them(stack, given, largest, kept):
    stack = stack.astype(given)
    stack[3, 2, 1] = largest
    frames = Frames(stack, 0.1)
    assert frames.counts.dtype == kept
    np.testing.assert_array_equal(frames.counts, stack)


def test_other_byte_order_is_turned(stack):
    counts = Frames(stack.astype(">u2"), 0.1).counts
    assert counts.dtype.isnative
    assert counts.dtype == np.uint16


def test_shapes_and_copies(stack):
    dose, mask = np.full((4, 5), 0.2, np.float32), np.ones((4, 5), bool)
    frames = Frames(stack, dose, mask)
    assert frames.shape == (4, 5)
    assert frames.frames == 7
    assert frames.dose.dtype == np.float32
    for given, kept in [(stack, frames.counts), (dose, frames.dose), (mask, frames.mask)]:
        assert not np.shares_memory(given, kept)
        assert not kept.flags.writeable


def test_a_single_image_is_refused_with_the_remedy(stack):
    with pytest.raises(InputError, match=r"counts has shape \(4, 5\); .*counts\[None\]"):
        Frames(stack[0], 0.1)
    assert Frames(stack[0][None], 0.1).frames == 1


@pytest.mark.parametrize(("value", "shown"), [(-1, "-1"), (0.5, "0.5"), (np.nan, "nan"), (np.inf, "inf")])
def test_impossible_counts_are_named(stack, value, shown):
    bad = stack.astype(type(value))
    bad[6, 3, 4] = value
    with pytest.raises(InputError, match=rf"counts at \(6, 3, 4\) is {shown}(\.0)?; give whole numbers"):
        Frames(bad, 0.1)


@pytest.mark.parametrize("dose", [0, -0.1, np.nan, np.inf, "one", None, [0.1], np.ones((7, 4, 5)), True])
def test_impossible_doses_are_refused(stack, dose):
    with pytest.raises(InputError, match="dose "):
        Frames(stack, dose)


@pytest.mark.parametrize("mask", [np.zeros((4, 5), bool), np.ones((7, 4, 5), bool), np.ones((4, 5)), "all"])
def test_impossible_masks_are_refused(stack, mask):
    with pytest.raises(InputError, match="mask "):
        Frames(stack, 0.1, mask)


@pytest.mark.parametrize("counts", [np.zeros((2, 0, 5)), np.zeros(3), np.zeros((2, 2, 2, 2)), 3, "a", None])
def test_what_is_no_stack_is_refused(counts):
    with pytest.raises(InputError, match="counts "):
        Frames(counts, 0.1)
