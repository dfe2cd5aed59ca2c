"""The logarithm of reports is that of the kernels, bit by bit."""

import sys
from subprocess import run

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from hmmseg.kernels.elementary import log
from hmmseg.model.logarithm import logarithms

POSITIVE = st.floats(0, 1e308, allow_subnormal=True)


@given(arrays.arrays(np.float64, st.integers(1, 30), elements=POSITIVE))
def test_bits_are_those_of_the_kernel(values: np.ndarray) -> None:
    expected = np.array([log(value) for value in values.tolist()])
    assert logarithms(values).tobytes() == expected.tobytes()


def test_values_around_one_and_at_the_ends() -> None:
    near = np.nextafter(1.0, [0.0, 2.0])
    values = np.array([0.0, 5e-324, 2.0**-1022, *near, 1.0, 2.0**0.5, 0.5**0.5, 1.7e308])
    expected = np.array([log(value) for value in values.tolist()])
    assert logarithms(values).tobytes() == expected.tobytes()
    assert logarithms(np.array([0.0, 1.0])).tolist() == [-np.inf, 0.0]


def test_a_page_is_made_without_waiting_for_compiled_code() -> None:
    script = "import hmmseg.jobs.report, sys; sys.exit('numba' in sys.modules)"
    assert run([sys.executable, "-c", script], check=False).returncode == 0
