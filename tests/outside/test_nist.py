"""Our running sums on the Statistical Reference Datasets of NIST.

Source: National Institute of Standards and Technology, Statistical Reference Datasets, Univariate Summary Statistics,
https://www.itl.nist.gov/div898/strd/univ/homepage.html: data and certified values of Lew, Lottery, Mavro, Michelso and
NumAcc1 to NumAcc4. The last four are from Simon, S. D. & LeSage, J. P. (1989), Assessing the accuracy of ANOVA
calculations in statistical software, Computational Statistics & Data Analysis 8, 325–332. The standard deviation has
n − 1, the lag-1 autocorrelation one mean and the sum of squares of the whole sample.
"""

import numpy as np
import pytest

from driftbook.estimators.windows import Layout, segments, whole_blocks, window_sums

DATA = {
    "Lew": """
    -213 -564 -35 -15 141 115 -420 -360 203 -338 -431 194 -220 -513 154 -125 -559 92 -21 -579 -52 99 -543 -175 162
    -457 -346 204 -300 -474 164 -107 -572 -8 83 -541 -224 180 -420 -374 201 -236 -531 83 27 -564 -112 131 -507
    -254 199 -311 -495 143 -46 -579 -90 136 -472 -338 202 -287 -477 169 -124 -568 17 48 -568 -135 162 -430 -422
    172 -74 -577 -13 92 -534 -243 194 -355 -465 156 -81 -578 -64 139 -449 -384 193 -198 -538 110 -44 -577 -6 66
    -552 -164 161 -460 -344 205 -281 -504 134 -28 -576 -118 156 -437 -381 200 -220 -540 83 11 -568 -160 172 -414
    -408 188 -125 -572 -32 139 -492 -321 205 -262 -504 142 -83 -574 0 48 -571 -106 137 -501 -266 190 -391 -406 194
    -186 -553 83 -13 -577 -49 103 -515 -280 201 300 -506 131 -45 -578 -80 138 -462 -361 201 -211 -554 32 74 -533
    -235 187 -372 -442 182 -147 -566 25 68 -535 -244 194 -351 -463 174 -125 -570 15 72 -550 -190 172 -424 -385 198
    -218 -536 96
    """,
    "Lottery": """
    162 671 933 414 788 730 817 33 536 875 670 236 473 167 877 980 316 950 456 92 517 557 956 954 104 178 794 278
    147 773 437 435 502 610 582 780 689 562 964 791 28 97 848 281 858 538 660 972 671 613 867 448 738 966 139 636
    847 659 754 243 122 455 195 968 793 59 730 361 574 522 97 762 431 158 429 414 22 629 788 999 187 215 810 782
    47 34 108 986 25 644 829 630 315 567 919 331 207 412 242 607 668 944 749 168 864 442 533 805 372 63 458 777
    416 340 436 140 919 350 510 572 905 900 85 389 473 758 444 169 625 692 140 897 672 288 312 860 724 226 884 508
    976 741 476 417 831 15 318 432 241 114 799 955 833 358 935 146 630 830 440 642 356 373 271 715 367 393 190 669
    8 861 108 795 269 590 326 866 64 523 862 840 219 382 998 4 628 305 747 247 34 747 729 645 856 974 24 568 24
    694 608 480 410 729 947 293 53 930 223 203 677 227 62 455 387 318 562 242 428 968
    """,
    "Mavro": """
    2.00180 2.00170 2.00180 2.00190 2.00180 2.00170 2.00150 2.00140 2.00150 2.00150 2.00170 2.00180 2.00180
    2.00190 2.00190 2.00210 2.00200 2.00160 2.00140 2.00130 2.00130 2.00150 2.00150 2.00160 2.00150 2.00140
    2.00130 2.00140 2.00150 2.00140 2.00150 2.00160 2.00150 2.00160 2.00190 2.00200 2.00200 2.00210 2.00220
    2.00230 2.00240 2.00250 2.00270 2.00260 2.00260 2.00260 2.00270 2.00260 2.00250 2.00240
    """,
    "Michelso": """
    299.85 299.74 299.90 300.07 299.93 299.85 299.95 299.98 299.98 299.88 300.00 299.98 299.93 299.65 299.76
    299.81 300.00 300.00 299.96 299.96 299.96 299.94 299.96 299.94 299.88 299.80 299.85 299.88 299.90 299.84
    299.83 299.79 299.81 299.88 299.88 299.83 299.80 299.79 299.76 299.80 299.88 299.88 299.88 299.86 299.72
    299.72 299.62 299.86 299.97 299.95 299.88 299.91 299.85 299.87 299.84 299.84 299.85 299.84 299.84 299.84
    299.89 299.81 299.81 299.82 299.80 299.77 299.76 299.74 299.75 299.76 299.91 299.92 299.89 299.86 299.88
    299.72 299.84 299.85 299.85 299.78 299.89 299.84 299.78 299.81 299.76 299.81 299.79 299.81 299.82 299.85
    299.87 299.87 299.81 299.74 299.81 299.94 299.95 299.80 299.81 299.87
    """,
    "NumAcc1": "10000001 10000003 10000002",
    "NumAcc2": "1.2 " + "1.1 1.3 " * 500,
    "NumAcc3": "1000000.2 " + "1000000.1 1000000.3 " * 500,
    "NumAcc4": "10000000.2 " + "10000000.1 10000000.3 " * 500,
}

CERTIFIED = {  # n, mean, standard deviation, lag-1 autocorrelation
    "Lew": (200, -177.435000000000, 277.332168044316, -0.307304800605679),
    "Lottery": (218, 518.958715596330, 291.699727470969, -0.120948622967393),
    "Mavro": (50, 2.00185600000000, 0.000429123454003053, 0.937989183438248),
    "Michelso": (100, 299.852400000000, 0.0790105478190518, 0.535199668621283),
    "NumAcc1": (3, 10000002.0, 1.0, -0.5),
    "NumAcc2": (1001, 1.2, 0.1, -0.999),
    "NumAcc3": (1001, 1000000.2, 0.1, -0.999),
    "NumAcc4": (1001, 10000000.2, 0.1, -0.999),
}

# Certified values have 15 digits. What is lost beyond that is the rounding of decimal data to float64, by the size of
# the mean over the standard deviation: up to 1e8 · 1e-16 for NumAcc4, which no method in float64 can avoid.
LAST_DIGIT = 2e-15
OF_SPREAD = {
    "Lew": 1e-13,
    "Lottery": 1e-13,
    "Mavro": 1e-11,
    "Michelso": 1e-11,
    "NumAcc1": 1e-13,
    "NumAcc2": 1e-11,
    "NumAcc3": 1e-9,
    "NumAcc4": 1e-8,
}
EVERY_WINDOW = 1e-9  # against two passes over the same float64 numbers


def numbers(name):
    return np.array([float(text) for text in DATA[name].split()])


def running(x, lookback):
    """Mean and standard deviation of every `lookback` neighbours, from running sums."""
    layout = Layout(lookback, len(x) - lookback + 1)
    blocks = whole_blocks(np.append(x, x[-1])[None], layout, 0, layout.n_blocks)
    cut = segments(blocks[:, :-1], lookback, layout.segment - 1)
    pivot = cut[..., lookback - 1 : lookback]
    u = cut - pivot
    mean = window_sums(u, lookback) / lookback
    spread = window_sums(u * u, lookback) - lookback * mean * mean
    found = mean + pivot, np.sqrt(spread / (lookback - 1))
    return tuple(values.reshape(-1)[: layout.n_windows] for values in found)


def autocorrelation(x):
    """Lag-1 autocorrelation, from sums of values and products measured from the last value."""
    n, u = len(x), x - x[-1]
    mean = window_sums(u, n)[0] / n
    spread = window_sums(u * u, n)[0] - n * mean * mean
    products = window_sums(u[1:] * u[:-1], n - 1)[0]
    return (products - mean * (2 * n * mean - u[0] - u[-1]) + (n - 1) * mean * mean) / spread


@pytest.mark.parametrize("name", DATA)
def test_certified_values(name):
    x = numbers(name)
    n, mean, sd, r1 = CERTIFIED[name]
    assert len(x) == n
    (found_mean,), (found_sd,) = running(x, n)
    assert found_mean == pytest.approx(mean, rel=LAST_DIGIT)
    assert found_sd == pytest.approx(sd, rel=OF_SPREAD[name])
    assert autocorrelation(x) == pytest.approx(r1, rel=OF_SPREAD[name])


@pytest.mark.parametrize("lookback", [2, 3, 20, 49])
@pytest.mark.parametrize("name", [name for name in DATA if name != "NumAcc1"])
def test_every_window_against_two_passes(name, lookback):
    x = numbers(name)
    windows = np.lib.stride_tricks.sliding_window_view(x, lookback)
    mean, sd = running(x, lookback)
    np.testing.assert_allclose(mean, windows.mean(axis=1), rtol=0, atol=LAST_DIGIT * np.abs(x).max())
    np.testing.assert_allclose(sd, windows.std(axis=1, ddof=1), rtol=EVERY_WINDOW, atol=0)


def test_the_order_of_the_data_counts():
    """NumAcc1 sorted has no autocorrelation."""
    assert autocorrelation(np.sort(numbers("NumAcc1"))) == pytest.approx(0.0, abs=LAST_DIGIT)
