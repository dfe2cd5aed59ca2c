"""Colours of states stay apart for people who see colours differently, and on a grey print."""

from itertools import combinations, pairwise

import numpy as np
import pytest

from hmmseg.report.colours import INK, STATES

MACHADO = {
    "none": np.eye(3),
    "protanopia": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216],
         [-0.003882, -0.048116, 1.051998]]
    ),
    "deuteranopia": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413],
         [-0.011820, 0.042940, 0.968881]]
    ),
    "tritanopia": np.array(
        [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602],
         [0.004733, 0.691367, 0.303900]]
    ),
}  # fmt: skip
"""Machado, Oliveira & Fernandes (2009), severity 1, on linear RGB; the numbers are from memory."""


def linear(colour: str) -> np.ndarray:
    """Linear RGB (IEC 61966-2-1)."""
    rgb = np.array([int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)])
    return np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)


def lab(rgb: np.ndarray) -> np.ndarray:
    """CIE L*a*b* under D65."""
    xyz = np.array(
        [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]
    ) @ np.clip(rgb, 0, 1)
    f = np.array([v ** (1 / 3) if v > 0.008856 else 7.787 * v + 16 / 116
                  for v in xyz / [0.9505, 1.0, 1.089]])  # fmt: skip
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


@pytest.mark.parametrize("kind", MACHADO)
def test_states_can_be_told_apart(kind: str) -> None:
    """A difference of 10 is plain to see side by side (2.3 is just noticeable)."""
    seen = [lab(MACHADO[kind] @ linear(colour)) for colour in STATES]
    for one, other in combinations(range(len(STATES)), 2):
        assert np.linalg.norm(seen[one] - seen[other]) > 10, (STATES[one], STATES[other])


def test_neighbours_differ_in_lightness() -> None:
    light = [lab(linear(colour))[0] for colour in STATES]
    assert all(abs(a - b) > 8 for a, b in pairwise(light))


def test_text_has_contrast() -> None:
    """WCAG 2.1, 1.4.6: at least 7 to 1 against white."""
    luminance = float(np.array([0.2126, 0.7152, 0.0722]) @ linear(INK))
    assert 1.05 / (luminance + 0.05) > 7
