"""The lapse fitted from a study's own stations, by month and hour."""

import numpy as np
import pytest

from climarisk import lapse

#: Every month x hour cell, 40 days of each.
DAYS = 40
MONTH_HOUR = np.concatenate([m * 24 + np.arange(24) for _ in range(DAYS) for m in range(12)])
N = len(MONTH_HOUR)
TRUE = 5.0 + 2.0 * np.cos(2 * np.pi * np.arange(12) / 12)[:, None] * np.ones((12, 24))
TRUE = TRUE + 1.5 * np.cos(2 * np.pi * (np.arange(24) - 14) / 24)  # 1.5 to 8.5 K/km


def network(elevations_m, true=TRUE, seed=1, siting_k=0.0):
    """Return stations that differ by their elevation and siting only, under weather of their own.

    T = level of the cell + weather of the hour - lapse of the cell x elevation + siting.
    """
    draw = np.random.default_rng(seed)
    common = 15.0 + 10.0 * np.sin(MONTH_HOUR) + draw.normal(0, 5.0, N)
    siting = siting_k * draw.normal(0, 1, len(elevations_m))
    return [
        common - true.reshape(-1)[MONTH_HOUR] * z / 1000.0 + s
        for z, s in zip(elevations_m, siting, strict=True)
    ]


def fit(temperatures, elevations_m, southern=False):
    return lapse.fit_lapse(temperatures, elevations_m, MONTH_HOUR, southern)


MANY = np.linspace(300.0, 2800.0, 12)
TABLE = lapse.table_lapse(southern=False)


# ---- the table -------------------------------------------------------------------------------


def test_table_by_day_and_night_and_season():
    # Day is 10-17 local standard hours; published ranges: day 6.5-7.5 K/km April to September,
    # 5 October to March, night 3-4 (Minder 2010, Rolland 2003, Blandford 2008).
    warm, day = np.arange(3, 9), np.arange(10, 18)
    cold = np.setdiff1d(np.arange(12), warm)
    night = np.setdiff1d(np.arange(24), day)
    by_day = TABLE[np.ix_(warm, day)]
    assert ((by_day >= 6.5) & (by_day <= 7.5)).all()
    assert (TABLE[np.ix_(cold, day)] == 5.0).all()
    by_night = TABLE[:, night]
    assert ((by_night >= 3.0) & (by_night <= 4.0)).all()


def test_southern_table_is_the_northern_one_half_a_year_later():
    np.testing.assert_array_equal(lapse.table_lapse(southern=True), np.roll(TABLE, 6, axis=0))


@pytest.mark.parametrize(
    ("elevations_m", "stations"),
    [((300.0, 1500.0), 0), ((300.0, 450.0, 599.0), 0), ((300.0, 450.0, 600.0), 3), ((), 0)],
)
def test_fit_needs_three_stations_over_300_m(elevations_m, stations):
    # METHODS 9, step 2.
    for southern in (False, True):
        got = fit(network(elevations_m), elevations_m, southern)
        assert got.stations == stations
        if stations == 0:
            np.testing.assert_array_equal(got.k_per_km, lapse.table_lapse(southern))


def test_stations_without_any_hour_do_not_count():
    airs = network((300.0, 900.0, 1500.0))
    airs[2] = np.full(N, np.nan)
    assert fit(airs, (300.0, 900.0, 1500.0)).stations == 0


# ---- what the stations show ------------------------------------------------------------------


def test_slopes_of_exact_stations_are_exact_before_pooling():
    effects = lapse.cell_effects(network(MANY), MONTH_HOUR)
    slope, _ = lapse._regress(effects, MANY / 1000.0)
    np.testing.assert_allclose(-slope.reshape(12, 24), TRUE, atol=1e-9)


def pooled_by_loop(true, elevations_m):
    """Return exact slopes pooled with their neighbours and the table, by the rule of the notes.

    Standard error of a slope without residuals: siting 0.9 K counted as 3 stations beside
    n - 2 degrees of freedom; the cell's neighbours are worth their precision and 0.5 K/km, the
    table 1.5 K/km.
    """
    n, x = len(elevations_m), np.asarray(elevations_m) / 1000.0
    sd = np.sqrt(3 * 0.81 / (n - 2 + 3)) / np.sqrt(((x - x.mean()) ** 2).sum())
    precision, four = 1 / sd**2, 1 / (sd**2 / 4 + 0.25)
    result = np.empty((12, 24))
    for m in range(12):
        for h in range(24):
            around = (
                true[m, h - 1] + true[m, (h + 1) % 24] + true[m - 1, h] + true[(m + 1) % 12, h]
            ) / 4
            total = precision + four + 1 / 1.5**2
            result[m, h] = (precision * true[m, h] + four * around + TABLE[m, h] / 1.5**2) / total
    return result


def test_fit_is_the_precision_weighted_mean_of_cell_neighbours_and_table():
    got = fit(network(MANY), MANY)
    assert got.stations == 12
    np.testing.assert_allclose(got.k_per_km, pooled_by_loop(TRUE, MANY), atol=1e-6)


def test_many_stations_over_a_great_height_show_the_true_lapse():
    # Twelve stations over 2500 m: the table keeps less than a tenth of its weight.
    got = fit(network(MANY), MANY)
    off = np.abs(got.k_per_km - TRUE)
    assert (off <= 0.1 * np.abs(TABLE - TRUE) + 0.1).all()
    assert np.abs(TABLE - TRUE).max() > 2.0


def test_few_stations_close_in_height_hardly_move_the_table():
    close = (500.0, 650.0, 800.0)
    got = fit(network(close), close)
    moved = np.abs(got.k_per_km - TABLE)
    assert got.stations == 3
    assert (moved <= 0.5 * np.abs(TRUE - TABLE).max()).all() and moved.max() > 0.01
    assert (got.sd_k_per_km > fit(network(MANY), MANY).sd_k_per_km).all()
    # No surer than the table's own spread allows, and never less sure than the table.
    assert (got.sd_k_per_km < 1.5).all()


def test_more_stations_draw_the_fit_nearer_the_truth():
    def off(n):
        elevations = np.linspace(500.0, 1500.0, n)
        return np.abs(fit(network(elevations), elevations).k_per_km - TRUE).mean()

    assert off(3) > off(6) > off(12) > off(40)


@pytest.mark.parametrize(("true", "bound"), [(-40.0, -10.0), (30.0, 9.8)])
def test_no_lapse_beyond_the_bounds(true, bound):
    # METHODS 9, step 2: ten kelvins of inversion per kilometre, and the dry adiabat.
    got = fit(network(MANY, np.full((12, 24), true)), MANY)
    assert (got.k_per_km == bound).all()
    inside = fit(network(MANY, np.full((12, 24), 9.0)), MANY)
    assert (inside.k_per_km < 9.8).all()


def test_one_station_off_by_kelvins_does_not_carry_the_fit_away():
    airs = network(MANY)
    airs[-1] = airs[-1] + 6.0  # the highest, a sun-warmed wall
    got = fit(airs, MANY)
    effects = lapse.cell_effects(airs, MONTH_HOUR)
    plain = -np.polyfit(MANY / 1000.0, effects, 1)[0].reshape(12, 24)
    assert np.abs(plain - TRUE).min() > 0.8  # what ordinary least squares makes of it
    assert np.abs(got.k_per_km - TRUE).mean() < 0.5 * np.abs(plain - TRUE).mean()


def test_fit_does_not_depend_on_the_order_of_the_stations():
    airs = network(MANY, siting_k=0.8)
    turned = fit(airs[::-1], MANY[::-1])
    np.testing.assert_allclose(turned.k_per_km, fit(airs, MANY).k_per_km, atol=1e-9)


def test_warmer_air_at_every_station_changes_no_lapse():
    airs = network(MANY, siting_k=0.8)
    warmer = fit([t + 7.0 for t in airs], MANY)
    np.testing.assert_allclose(warmer.k_per_km, fit(airs, MANY).k_per_km, atol=1e-9)


# ---- gaps ------------------------------------------------------------------------------------


def test_hours_that_a_station_lacks_do_not_bias_it_against_the_others():
    airs = network(MANY)
    full = fit(airs, MANY)
    weather = airs[0] + TRUE.reshape(-1)[MONTH_HOUR] * MANY[0] / 1000.0
    cell_mean = np.bincount(MONTH_HOUR, weather, 288) / DAYS
    warm = weather > cell_mean[MONTH_HOUR]
    # The two highest report in warm weather only: their plain means are about 4 K too warm.
    gappy = [*airs[:-2], *(np.where(warm, t, np.nan) for t in airs[-2:])]
    got = fit(gappy, MANY)
    known = np.isfinite(gappy[-1])
    count = np.bincount(MONTH_HOUR[known], minlength=288)
    naive = np.bincount(MONTH_HOUR[known], gappy[-1][known], 288) / np.maximum(count, 1)
    whole = np.bincount(MONTH_HOUR, airs[-1], 288) / DAYS
    assert np.median((naive - whole)[count > 0]) > 3.0
    effects = lapse.cell_effects(gappy, MONTH_HOUR)
    off = effects[-1] - effects[0] - (whole - np.bincount(MONTH_HOUR, airs[0], 288) / DAYS)
    assert np.nanmax(np.abs(off)) < 0.1
    assert got.stations == full.stations


def test_cell_without_hours_takes_its_neighbours_and_the_table():
    airs = network(MANY)
    noon_in_june = MONTH_HOUR == 5 * 24 + 12
    blank = [np.where(noon_in_june, np.nan, t) for t in airs]
    got, full = fit(blank, MANY), fit(airs, MANY)
    others = np.ones((12, 24), bool)
    others[5, 12] = False
    near = np.zeros((12, 24), bool)
    near[5, [11, 13]] = near[[4, 6], 12] = True
    np.testing.assert_allclose(got.k_per_km[others & ~near], full.k_per_km[others & ~near])
    assert np.isfinite(got.k_per_km).all()
    around = (TRUE[5, 11] + TRUE[5, 13] + TRUE[4, 12] + TRUE[6, 12]) / 4
    low, high = sorted((around, TABLE[5, 12]))
    assert low <= got.k_per_km[5, 12] <= high
    assert got.sd_k_per_km[5, 12] > full.sd_k_per_km[5, 12]


def test_few_hours_give_a_station_no_mean_of_a_cell():
    airs = network(MANY[:3])
    few = (np.cumsum(MONTH_HOUR == 0) <= 9) | (MONTH_HOUR != 0)
    airs[0] = np.where(few, airs[0], np.nan)  # 9 hours of January, midnight
    effects = lapse.cell_effects(airs, MONTH_HOUR)
    assert np.isnan(effects[0, 0])
    assert np.isfinite(effects[0, 1:]).all() and np.isfinite(effects[1:]).all()
