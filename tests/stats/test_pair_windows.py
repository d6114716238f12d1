"""Many windows of one pair at once are those of the one-window scan, number by number."""

import numpy as np
import pytest

from rhovane.stats import window_scan, window_table


def series(seed: int, n: int = 600) -> tuple[np.ndarray, np.ndarray]:
    """Tied, gappy, autocorrelated, with a stuck stretch."""
    rng = np.random.default_rng(seed)
    level = np.cumsum(rng.normal(size=n)) * 0.3
    x = np.round(level + rng.normal(size=n))
    y = np.round(0.7 * level + rng.normal(size=n))
    x[rng.random(n) < 0.1] = np.nan
    y[rng.random(n) < 0.1] = np.nan
    y[300:420] = 3.0
    x[480:520] = np.nan
    return x, y


@pytest.mark.parametrize("method", ["spearman", "kendall"])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_every_window_is_that_of_the_one_window_scan(seed: int, method: str):
    x, y = series(seed)
    lags, window = [-3, 0, 2], 96
    ends = np.arange(20, 600, 24)
    fewest = np.random.default_rng(seed).integers(24, 72, len(ends))
    table = window_table(x, y, window=window, end=ends, min_pairs=fewest, lags=lags, method=method)
    seen = set()
    for row, end in enumerate(ends):
        scan = window_scan(
            x[: end + 1], y[: end + 1], window=window, lags=lags, method=method, min_pairs=int(fewest[row])
        )
        for name in ("statistic", "n_pairs", "n_effective", "p_value"):
            np.testing.assert_array_equal(
                getattr(table, name)[row], getattr(scan, name), err_msg=f"{name} {end}"
            )
        assert table.reason[row] == list(scan.reason)
        np.testing.assert_array_equal(table.low[row, 1], scan.low[1])
        np.testing.assert_array_equal(table.high[row, 1], scan.high[1])
        seen.update("" if r is None else r.split(":")[0].split(" series")[0] for r in scan.reason)
    assert {"", "too few pairs", "the second"} <= seen


def test_without_lag_zero_there_is_no_interval():
    x, y = series(4)
    table = window_table(x, y, window=96, end=[200], min_pairs=24, lags=[1, 2])
    assert np.isnan(table.low).all()
    assert np.isfinite(table.p_value).all()


@pytest.mark.parametrize(
    ("changes", "told"),
    [
        ({"end": [600]}, "rows 0 to 599 are allowed"),
        ({"end": [-1]}, "rows 0 to 599 are allowed"),
        ({"min_pairs": 97}, "2 to 96 is allowed"),
        ({"min_pairs": 1}, "2 to 96 is allowed"),
        ({"window": 4}, "window"),
        ({"method": "pearson"}, "method"),
        ({"lags": [97]}, "lag"),
    ],
)
def test_mistakes_are_told_with_what_is_allowed(changes, told: str):
    x, y = series(5)
    arguments = {"window": 96, "end": [200], "min_pairs": 24, "lags": [0]} | changes
    with pytest.raises(ValueError, match=told):
        window_table(x, y, **arguments)
