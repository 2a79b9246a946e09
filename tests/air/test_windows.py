import numpy as np
import pytest
from numpy.testing import assert_allclose

from simimg.air.windows import WINDOWS, shut_parts, shut_share, window_at


def test_the_table_has_no_gaps_and_takes_turns():
    assert WINDOWS[0].lower == 0.0
    assert WINDOWS[-1].upper == np.inf
    for one, two in zip(WINDOWS, WINDOWS[1:]):
        assert one.upper == two.lower
        assert one.clear is not two.clear
    assert all(window.sentence for window in WINDOWS)


# T. Common practice of the trade.
@pytest.mark.parametrize(
    ("wavelength", "clear"),
    [
        (1e-12, False),  # gamma rays
        (1e-9, False),  # X rays
        (121.6e-9, False),  # Lyman alpha
        (250e-9, False),
        (350e-9, True),
        (550e-9, True),
        (900e-9, True),
        (1.22e-6, True),  # J
        (1.40e-6, False),
        (1.63e-6, True),  # H
        (1.87e-6, False),
        (2.19e-6, True),  # K
        (2.7e-6, False),
        (3.5e-6, True),  # L
        (4.3e-6, False),
        (6.3e-6, False),
        (10.5e-6, True),  # N
        (15e-6, False),
        (20e-6, True),  # Q
        (100e-6, False),
        (1.3e-3, True),
        (5e-3, False),
        (0.211, True),  # neutral hydrogen
        (6.0, True),
        (50.0, False),
    ],
)
def test_windows_of_the_trade(wavelength, clear):
    window = window_at(wavelength)
    assert window.clear is clear
    assert window.lower <= wavelength < window.upper


def test_share_of_a_band():
    assert shut_share(500e-9, 600e-9) == 0.0
    assert shut_share(200e-9, 250e-9) == 1.0
    assert_allclose(shut_share(250e-9, 350e-9), 0.5, rtol=1e-12)
    # A band over several.
    assert_allclose(shut_share(1.0e-6, 2.0e-6), 0.05 + 0.10 + 0.15, rtol=1e-9)
    parts = shut_parts(1.0e-6, 2.0e-6)
    assert len(parts) == 3
    assert all("water vapour" in window.sentence for window, _ in parts)
    assert shut_parts(500e-9, 600e-9) == []


@pytest.mark.parametrize("wavelength", [0.0, -1.0, np.nan, np.inf])
def test_nonsense_is_refused(wavelength):
    with pytest.raises(ValueError, match="wavelength"):
        window_at(wavelength)
    with pytest.raises(ValueError, match="edges"):
        shut_share(1e-6, wavelength)
