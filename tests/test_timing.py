"""Stations whose hours are dated unlike their neighbours'."""

from dataclasses import replace

import numpy as np
import pytest

from climarisk.archives.synthetic import SyntheticStation, generate
from climarisk.pipeline import evaluate
from climarisk.progress import quiet
from climarisk.stations import Station
from climarisk.study import read_study
from climarisk.timing import misdated, timing_findings
from climarisk.weather import load_weather

N = 24 * 300
MONTH_HOUR = (np.arange(N) // 720) % 12 * 24 + np.arange(N) % 24


def station(i, km_north=0.0, elevation_m=500.0):
    return Station(f"S{i}", f"S{i}", 46.0 + km_north / 111.19, 11.0, elevation_m, "synthetic")


def weather(seed=1, memory_h=48.0):
    """Return air that changes over two days or so, without a daily course."""
    draw = np.random.default_rng(seed)
    keep = np.exp(-1.0 / memory_h)
    series, noise = np.empty(N), draw.normal(0, np.sqrt(1 - keep**2), N)
    level = 0.0
    for i in range(N):
        level = keep * level + noise[i]
        series[i] = level
    return 5.0 * series


COMMON = weather()


def network(n=6, own_sd=1.0):
    """Return stations under the same weather, each with scatter and a daily course of its own."""
    daily = 6.0 * np.sin(2 * np.pi * np.arange(N) / 24)
    draw = np.random.default_rng(7)
    airs = [COMMON + draw.uniform(0.5, 1.5) * daily + draw.normal(0, own_sd, N) for _ in range(n)]
    return [station(i, 10.0 * i) for i in range(n)], airs


def late(series, hours):
    """Return a series that shows everything so many hours late."""
    moved = np.full(N, np.nan)
    if hours > 0:
        moved[hours:] = series[:-hours]
    else:
        moved[:hours] = series[-hours:]
    return moved


def test_well_dated_stations_are_not_accused():
    stations, airs = network()
    assert misdated(stations, airs, MONTH_HOUR) == {}
    assert timing_findings({}) == []


@pytest.mark.parametrize("lag_h", [24, -24, 48, -72, 18])
def test_shifted_station_is_found_with_its_lag(lag_h):
    stations, airs = network()
    airs[2] = late(airs[2], lag_h)
    found = misdated(stations, airs, MONTH_HOUR)
    assert list(found) == ["S2"]
    assert found["S2"].lag_h == pytest.approx(lag_h, abs=3)  # the step of the comparison
    assert found["S2"].correlation_moved > found["S2"].correlation_as_dated + 0.04
    (told,) = timing_findings(found)
    assert (told.severity, told.subject, told.id, told.check) == (
        "reject",
        "station",
        "S2",
        "timing",
    )
    # It runs late by the lag, so it fits when moved back.
    assert f"moved by about {-found['S2'].lag_h:+d} h" in told.message
    assert "time zone" in told.message


def test_correlation_is_that_of_numpy():
    stations, airs = network(3)
    airs[0] = late(airs[0], 24)
    found = misdated(stations, airs, MONTH_HOUR)["S0"]

    def anomaly(t):
        known = np.isfinite(t)
        mean = np.array([t[(c == MONTH_HOUR) & known].mean() for c in range(240)])
        return (t - mean[MONTH_HOUR])[::3]

    own = anomaly(airs[0])
    other = np.median([anomaly(airs[1]), anomaly(airs[2])], axis=0)
    both = np.isfinite(own)
    plain = np.corrcoef(own[both], other[both])[0, 1]
    moved = np.corrcoef(own[8:], other[:-8])[0, 1]
    assert found.correlation_as_dated == pytest.approx(plain, abs=1e-9)
    assert found.correlation_moved == pytest.approx(moved, abs=1e-9)


def test_several_shifted_stations_are_found_and_the_others_are_not():
    stations, airs = network(9)
    airs[1], airs[5] = late(airs[1], 36), late(airs[5], -24)
    found = misdated(stations, airs, MONTH_HOUR)
    assert {i: m.lag_h for i, m in found.items()} == {"S1": 36, "S5": -24}


def test_order_of_the_stations_does_not_matter():
    stations, airs = network(8)
    airs[3] = late(airs[3], 30)
    turned = misdated(stations[::-1], airs[::-1], MONTH_HOUR)
    assert turned == misdated(stations, airs, MONTH_HOUR)


def test_passing_fronts_are_no_misdating():
    # Stations down the wind see the weather up to 9 h later: below half a day.
    stations, airs = network()
    for i, lag in enumerate((3, 6, 9)):
        airs[i] = late(airs[i], lag)
    assert misdated(stations, airs, MONTH_HOUR) == {}


def test_gaps_and_levels_do_not_matter():
    stations, airs = network()
    draw = np.random.default_rng(5)
    for i, t in enumerate(airs):
        t += 4.0 * i
        t[draw.random(N) < 0.3] = np.nan
    assert misdated(stations, airs, MONTH_HOUR) == {}
    airs[4] = late(airs[4], 24)
    assert list(misdated(stations, airs, MONTH_HOUR)) == ["S4"]


def test_two_neighbours_within_150_km_are_needed():
    stations, airs = network(3)
    airs[2] = late(airs[2], 24)
    assert list(misdated(stations, airs, MONTH_HOUR)) == ["S2"]
    assert misdated(stations[1:], airs[1:], MONTH_HOUR) == {}
    far = [stations[0], stations[1], station(2, 170.0)]
    assert misdated(far, airs, MONTH_HOUR) == {}


def test_a_season_in_common_is_needed():
    stations, airs = network(4)
    airs[0] = late(airs[0], 24)
    for days, found in ((80, []), (110, ["S0"])):
        short = [airs[0].copy(), *airs[1:]]
        short[0][24 * days :] = np.nan
        assert list(misdated(stations, short, MONTH_HOUR)) == found


def test_stations_without_weather_in_common_accuse_nobody():
    stations, _ = network(5)
    unrelated = [weather(seed) for seed in range(5)]
    assert misdated(stations, unrelated, MONTH_HOUR) == {}


def test_stations_without_any_change_accuse_nobody():
    stations, _ = network(5)
    nothing = [np.full(N, np.nan) for _ in range(5)]
    assert misdated(stations, nothing, MONTH_HOUR) == {}
    flat = [np.full(N, 10.0) for _ in range(5)]
    assert misdated(stations, flat, MONTH_HOUR) == {}
    assert misdated([], [], MONTH_HOUR) == {}


def test_generated_weather_is_well_dated():
    made = [
        SyntheticStation(f"S{i}", f"S{i}", 46.0 + i / 10, 11.0 + i / 8, 300.0 + 350 * i, 1.0)
        for i in range(6)
    ]
    files = generate(made, 2020, 2020, 42)
    tables = [files[s.id].hours["temperature_c"] for s in made]
    hours = tables[0].index
    for t in tables:
        hours = hours.union(t.index)
    airs = [t.reindex(hours).to_numpy() for t in tables]
    cell = (hours.month.to_numpy() - 1) * 24 + hours.hour.to_numpy()
    stations = [Station(s.id, s.name, s.latitude, s.longitude, s.elevation_m, "") for s in made]
    assert misdated(stations, airs, cell) == {}
    airs[3] = np.concatenate((np.full(24, np.nan), airs[3][:-24]))
    assert list(misdated(stations, airs, cell)) == ["S3"]


# ---- in a study ------------------------------------------------------------------------------

NEAR = "".join(
    f"N{i},Near {i} (invented),{46.40 + i / 20},{11.05 + i / 25},{600 + 150 * i}\n"
    for i in range(4)
)


def test_misdated_station_is_told_and_serves_no_field_that_is_not_pinned_to_it(study_folder):
    study = study_folder()
    study.write("stations.csv", (study.folder / "stations.csv").read_text() + NEAR)
    read = read_study(study.file)
    weather = load_weather(read, None, quiet)
    shifted = []
    for s in weather.stations:
        hours = s.hours
        if s.station.id == "VALE":  # LOW is pinned to it; MID is not
            hours = hours.set_axis(hours.index + np.timedelta64(48, "h"))
        shifted.append(replace(s, hours=hours))
    result = evaluate(read, replace(weather, stations=tuple(shifted)))
    told = {f.id for f in result.findings if f.check == "timing"}
    assert told == {"VALE"}
    use = result.station_use.groupby("field")["station"].agg(set)
    assert use["LOW"] == {"VALE"}
    assert "VALE" not in use["MID"] and use["MID"] >= {"N0", "N1"}
    sound = evaluate(read, weather)
    assert not [f for f in sound.findings if f.check == "timing"]
    assert "VALE" in set(sound.station_use.query("field == 'MID'")["station"])
