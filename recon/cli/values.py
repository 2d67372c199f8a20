"""Values typed as options."""

from __future__ import annotations

import argparse


def real(text: str) -> float:
    """Return a number."""
    try:
        return float(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a number") from None


def weight(text: str) -> float | str:
    """Return a number, or a name as it is; `recon.reconstruct` knows which there are."""
    try:
        return float(text)
    except ValueError:
        return text


def whole(text: str) -> int:
    """Return a whole number."""
    try:
        return int(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a whole number") from None
