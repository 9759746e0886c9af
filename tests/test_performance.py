"""Performance tables, factors and margins: published examples, and laws that must hold."""

import csv
import re
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.interpolate import RegularGridInterpolator

from climarisk import performance as perf
from climarisk.aircraft import AircraftProfile, PerformanceTable, ScaledFigures
from climarisk.atmosphere import density_altitude_ft, isa_pressure_hpa
from climarisk.fields import Field, RunwayDirection
from climarisk.units import METRES_PER_FOOT

with (Path(__file__).parent / "reference" / "performance_check_values.csv").open(
    encoding="utf-8", newline=""
) as stream:
    ROWS = list(csv.DictReader(stream))


def table(values, pa=(0.0, 4000.0), t=(0.0, 20.0), mass_kg=700.0, speed_kt=None):
    axes = np.array(pa, float), np.array(t, float)
    return PerformanceTable(
        mass_kg, *axes, {k: np.array(v, float) for k, v in values.items()}, speed_kt
    )


def takeoff(roll, to_50ft, **axes):
    return table({"ground_roll_m": roll, "distance_50ft_m": to_50ft}, **axes)


def flat(value):
    """Return a two by two grid of one value."""
    return [[value, value], [value, value]]


def direction(runway="09", length=1000.0, **changes):
    d = RunwayDirection(
        runway, 90.0, length, length, length, length, 0.0, "paved", takeoff=True, landing=True
    )
    return replace(d, **changes)


def field(*runways):
    return Field("F", "Field", 40.0, -105.0, 1500.0, "America/Denver", (), runways)


PLAIN = AircraftProfile(
    "a",
    "Invented",
    "invented",
    "natural",
    True,
    800.0,
    700.0,
    500.0,
    takeoff=(takeoff([[200, 240], [300, 360]], [[400, 480], [600, 720]]),),
    landing=(table({"distance_50ft_m": [[350, 370], [420, 450]]}),),
    climb=(table({"rate_ft_min": [[800, 700], [500, 400]]}, speed_kt=70.0),),
)


def air(pressure_altitude_ft, temperature_c):
    """Return dry air at pressure altitudes and temperatures, as the tables and limits need it."""
    pa, t = np.broadcast_arrays(
        np.atleast_1d(pressure_altitude_ft).astype(float), np.asarray(temperature_c, float)
    )
    pressure, dry = isa_pressure_hpa(pa * METRES_PER_FOOT), np.zeros(pa.shape)
    return perf.TableAir(
        pa,
        t,
        t,
        density_altitude_ft(pressure, t, dry),
        perf.density_ratio(pressure, t, dry),
    )


def read(grid, pa_ft, t_c, **axes):
    """Read the quantity of a one-table grid at a single point."""
    one = table({"distance_50ft_m": grid}, **axes)
    return perf.read_off(one, "distance_50ft_m", np.array([pa_ft]), np.array([t_c]))[0]


# ---- published values ------------------------------------------------------------------------


def interpolated(row):
    pa_low, low, pa_high, high, query = (float(x) for x in re.findall(r"-?\d+\b", row["inputs"]))
    grid = [[low, low], [high, high]]
    return read(grid, query, 10.0, pa=(pa_low, pa_high))


def slope_factor(row):
    slope = float(re.search(r"(\d+) %", row["inputs"]).group(1))
    if row["quantity"].split("_")[0] == "slope":
        takes_off = row["quantity"] == "slope_to"
    else:
        takes_off = "_to_" in row["quantity"]
    if takes_off:
        return perf.takeoff_correction(direction(slope_pct=slope))
    return perf.landing_correction(direction(slope_pct=-slope))


def surface_factor(correction, *surfaces):
    """Return the one factor that all these surfaces have."""

    def factor(row):
        (value,) = {correction(direction(surface=s)) for s in surfaces}
        return value

    return factor


def leaflet_chain(row):
    """Return the distance that just fits: table axes carry mass and elevation, factors the rest."""
    base, heavier, higher = 300.0, 1.20, 1.10  # first three inputs of the row, as the leaflet's
    grids = [[[m * base, m * base], [m * base * higher, m * base * higher]] for m in (1.0, heavier)]
    tables = tuple(
        takeoff(grid, grid, pa=(0, 1000), mass_kg=mass)
        for grid, mass in zip(grids, (700.0, 770.0), strict=True)
    )
    profile = replace(PLAIN, takeoff=tables, planning_kg=770.0, takeoff_factor=1.33)
    strip = field(direction(length=1000.0, surface="grass", slope_pct=2.0))
    margin = perf.takeoff_margins(profile, strip, air(1000, 10))[1][0]
    return 1000.0 / (1.0 + margin)


def mass_ratio(row):
    ratio = float(re.search(r"W/W0=([\d.]+)", row["inputs"]).group(1))
    return scaled_roll(700.0 * ratio, 1.0, 1.0)


def scaled_roll(planning_kg, sigma, figure=1.0):
    profile = scaled_profile(planning_kg, takeoff_ground_roll_m=figure)
    one = replace(air(0, 15), density_ratio=np.array([sigma]))
    return perf.required(profile, "takeoff", "ground_roll_m", one)[0]


def scaled_profile(planning_kg=700.0, **figures):
    return replace(
        PLAIN,
        takeoff=(),
        landing=(),
        climb=(),
        planning_kg=planning_kg,
        scaled=ScaledFigures(700.0, **figures),
    )


def power_law(row):
    v = {k: float(x) for k, x in re.findall(r"([A-Za-z/0]+)=([\d.]+)", row["inputs"])}
    with pytest.MonkeyPatch.context() as patch:
        patch.setitem(perf.SCALING, "ground_roll_m", (v["m"], v["n"]))
        roll = scaled_roll(700.0 * v["W/W0"], v["sigma"])
    # Lighter than the figure's mass there is no credit: its share of the row is put back.
    return roll * min(v["W/W0"], 1.0) ** v["n"]


def gradient(row):
    rate, speed = (float(x) for x in re.findall(r"=([\d.]+)", row["inputs"]))
    return perf.climb_gradient_pct(rate, speed, 1.0)


QUANTITIES = {
    "table_interpolation": interpolated,
    "takeoff_weight_factor": mass_ratio,
    "slope_to": slope_factor,
    "slope_ldg": slope_factor,
    "grass_dry_to": surface_factor(perf.takeoff_correction, "grass"),
    "grass_wet_to": surface_factor(perf.takeoff_correction, "wet-grass"),
    "grass_ldg": surface_factor(perf.landing_correction, "grass"),
    "ssl7c_to_drygrass": surface_factor(perf.takeoff_correction, "grass"),
    "ssl7c_to_wetgrass": surface_factor(perf.takeoff_correction, "wet-grass"),
    "ssl7c_to_slope2": slope_factor,
    "ssl7c_to_soft": surface_factor(perf.takeoff_correction, "soft", "snow"),
    "ssl7c_ldg_drygrass": surface_factor(perf.landing_correction, "grass"),
    "ssl7c_ldg_wetgrass": surface_factor(perf.landing_correction, "wet-grass"),
    "ssl7c_ldg_slope2": slope_factor,
    "ssl7c_ldg_soft": surface_factor(perf.landing_correction, "soft", "snow"),
    "ssl7c_chain_example": leaflet_chain,
    "ground_roll_scale": power_law,
    "climb_gradient": gradient,
}


@pytest.mark.parametrize("row", ROWS, ids=lambda row: row["id"])
def test_published_value(row):
    # A printed factor is met to the last bit of the product that makes it.
    tolerance = float(row["tolerance"]) or 1e-15
    assert QUANTITIES[row["quantity"]](row) == pytest.approx(
        float(row["expected"]), rel=0, abs=tolerance
    )


def test_every_surface_has_both_factors_and_none_gives_credit():
    from climarisk.fields import SURFACES

    for factors in (perf.TAKEOFF_SURFACE, perf.LANDING_SURFACE):
        assert set(factors) == set(SURFACES)
        assert factors["paved"] == 1.0
        assert min(factors.values()) == 1.0


def test_gravel_factors_are_those_of_a_metal_surface():
    # NZ CAA AC91-3, "metal": take-off 1.05, landing 1.08 (both from memory).
    gravel = direction(surface="gravel")
    assert perf.takeoff_correction(gravel) == 1.05
    assert perf.landing_correction(gravel) == 1.08


def test_scaling_exponents_lie_in_the_published_brackets():
    # Ground roll W^2 (Anderson, Introduction to Flight, ch. 6), density exponent 2.2-2.4 for a
    # naturally aspirated piston engine; distance to 50 ft 2.2-3.3, the upper end implied by the
    # +10 % per 1000 ft of the UK CAA leaflet: ln 1.10 / -ln sigma(1000 ft).
    sigma_1000ft = 0.97106  # ICAO Doc 7488/3, standard atmosphere at 1000 ft
    implied = np.log(1.10) / -np.log(sigma_1000ft)
    roll, to_50ft, landing = perf.SCALING.values()
    assert 2.2 <= roll[0] <= 2.4 and roll[1] == 2.0
    assert 2.2 <= to_50ft[0] <= implied + 0.05 and to_50ft[1] == 2.0
    # Landing: +10 % per 10 % mass is an exponent of 1; 5 %/1000 ft and 5 %/10 K imply 1.66, 1.43.
    assert 1.43 <= landing[0] <= 1.66 and landing[1] == 1.0


# ---- reading a table -------------------------------------------------------------------------


@st.composite
def tables_and_points(draw, n_masses=1):
    """Draw tables of one size at rising masses, and points inside them."""
    rows, columns = draw(st.integers(2, 5)), draw(st.integers(2, 5))
    step = st.floats(0.5, 2500.0)
    pa = np.cumsum(draw(st.lists(step, min_size=rows, max_size=rows))) - 2000.0
    t = np.cumsum(draw(st.lists(st.floats(0.5, 20.0), min_size=columns, max_size=columns))) - 30.0
    masses = 500.0 + np.cumsum(
        draw(st.lists(st.floats(1.0, 300.0), min_size=n_masses, max_size=n_masses))
    )
    cells = n_masses * rows * columns
    grid = np.array(draw(st.lists(st.floats(1.0, 3000.0), min_size=cells, max_size=cells)))
    grid = grid.reshape(n_masses, rows, columns)
    share = st.floats(0.0, 1.0)
    points = draw(st.lists(st.tuples(share, share, share), min_size=1, max_size=6))
    at = [
        axis[0] + np.array(s) * (axis[-1] - axis[0])
        for axis, s in zip((masses, pa, t), zip(*points, strict=True), strict=True)
    ]
    at = [np.clip(x, axis[0], axis[-1]) for x, axis in zip(at, (masses, pa, t), strict=True)]
    tables = [
        table({"distance_50ft_m": g}, pa=pa, t=t, mass_kg=m)
        for g, m in zip(grid, masses, strict=True)
    ]
    return tables, at


@settings(deadline=None)
@given(tables_and_points())
def test_read_off_inside_the_table_equals_the_library(case):
    (one,), (_, pa, t) = case
    grid = one.values["distance_50ft_m"]
    expected = RegularGridInterpolator((one.pressure_altitude_ft, one.temperature_c), grid)
    got = perf.read_off(one, "distance_50ft_m", pa, t)
    np.testing.assert_allclose(got, expected(np.column_stack([pa, t])), rtol=1e-11)
    assert (got >= grid.min() * (1 - 1e-12)).all() and (got <= grid.max() * (1 + 1e-12)).all()


@settings(deadline=None)
@given(tables_and_points(n_masses=3))
def test_at_mass_inside_the_table_equals_the_library(case):
    tables, (masses, pa, t) = case
    grids = np.array([one.values["distance_50ft_m"] for one in tables])
    axes = (
        [one.mass_kg for one in tables],
        tables[0].pressure_altitude_ft,
        tables[0].temperature_c,
    )
    expected = RegularGridInterpolator(axes, grids)
    for mass, p, c in zip(masses, pa, t, strict=True):
        got = perf.at_mass(
            tables,
            mass,
            lambda one, p=p, c=c: perf.read_off(
                one, "distance_50ft_m", np.array([p]), np.array([c])
            ),
        )
        np.testing.assert_allclose(got, expected([mass, p, c]), rtol=1e-11)


def test_read_off_on_the_grid_gives_the_printed_cells():
    cells = np.array([[300.0, 330.0, 371.0], [410.0, 455.0, 501.0]])
    one = table({"distance_50ft_m": cells}, pa=(0, 2000), t=(-10, 0, 13))
    pa, t = np.meshgrid(one.pressure_altitude_ft, one.temperature_c, indexing="ij")
    got = perf.read_off(one, "distance_50ft_m", pa.ravel(), t.ravel())
    assert got.tolist() == cells.ravel().tolist()


@pytest.mark.parametrize(("pa", "t"), [(4000.0, 10.0), (2000.0, 20.0), (4000.0, 20.0)])
def test_read_off_exactly_on_the_last_row_or_column_is_inside(pa, t):
    assert np.isfinite(read([[1, 2], [3, 4]], pa, t))


@pytest.mark.parametrize(
    ("pa", "t"), [(np.nextafter(4000.0, 5000), 10.0), (2000.0, np.nextafter(20.0, 30))]
)
def test_read_off_the_next_number_beyond_the_table_is_outside(pa, t):
    assert np.isnan(read([[1, 2], [3, 4]], pa, t))


def test_read_off_colder_and_lower_take_the_first_column_and_row():
    grid = [[100.0, 120.0], [200.0, 240.0]]
    assert read(grid, -1500.0, 10.0) == read(grid, 0.0, 10.0) == 110.0
    assert read(grid, 2000.0, -40.0) == read(grid, 2000.0, 0.0) == 150.0
    assert read(grid, -9999.0, -90.0) == 100.0
    # Colder does not help a row that is not there, nor lower a column.
    assert np.isnan(read(grid, 4001.0, -40.0))
    assert np.isnan(read(grid, -500.0, 21.0))


def test_read_off_a_blank_cell_blanks_what_it_weighs_on_and_no_more():
    blank = [[100.0, 120.0, 140.0], [200.0, 240.0, np.nan]]
    axes = {"pa": (0.0, 4000.0), "t": (0.0, 20.0, 40.0)}
    assert np.isnan(read(blank, 4000.0, 40.0, **axes))
    assert np.isnan(read(blank, 1.0, 20.1, **axes))
    assert read(blank, 4000.0, 20.0, **axes) == 240.0
    assert read(blank, 0.0, 30.0, **axes) == 130.0  # on the row below the blank cell
    assert read(blank, 2000.0, 20.0, **axes) == 180.0  # on the column beside it


def test_read_off_a_table_of_one_row_serves_up_to_it():
    assert read([[100.0, 120.0]], 500.0, 10.0, pa=(1000.0,)) == 110.0
    assert read([[100.0, 120.0]], 1000.0, 10.0, pa=(1000.0,)) == 110.0
    assert np.isnan(read([[100.0, 120.0]], 1000.1, 10.0, pa=(1000.0,)))


def test_read_off_unknown_air_gives_no_distance():
    assert np.isnan(read([[1, 2], [3, 4]], np.nan, 10.0))
    assert np.isnan(read([[1, 2], [3, 4]], 100.0, np.nan))


def test_at_mass_between_lighter_and_heavier():
    tables = [table({"d": flat(v)}, mass_kg=m) for m, v in ((600.0, 300.0), (800.0, 500.0))]

    def at(mass):
        return perf.at_mass(tables, mass, lambda one: one.values["d"][:1, 0])[0]

    assert at(600.0) == 300.0 and at(800.0) == 500.0
    assert at(650.0) == 350.0
    assert at(100.0) == 300.0  # no credit for less than the lightest tabulated
    assert np.isnan(at(np.nextafter(800.0, 900)))


def test_at_mass_needs_both_tables_to_reach_the_hour():
    light = table({"d": [[1, 2], [3, 4]]}, t=(0, 40), mass_kg=600)
    heavy = table({"d": [[2, 3], [4, 5]]}, t=(0, 20), mass_kg=800)

    def at(mass, t):
        def off(one):
            return perf.read_off(one, "d", np.array([0.0]), np.array([t]))

        return perf.at_mass([light, heavy], mass, off)[0]

    assert np.isfinite(at(700.0, 20.0))
    assert np.isnan(at(700.0, 30.0))
    assert np.isfinite(at(600.0, 30.0))


# ---- runway directions -----------------------------------------------------------------------


def test_slope_gives_no_credit():
    assert perf.takeoff_correction(direction(slope_pct=-5.0)) == 1.0
    assert perf.landing_correction(direction(slope_pct=5.0)) == 1.0
    assert perf.takeoff_correction(direction(slope_pct=3.0)) == pytest.approx(1.15)
    assert perf.landing_correction(direction(slope_pct=-3.0)) == pytest.approx(1.15)


def test_margins_one_way_strip_uses_the_permitted_directions_only():
    # Land uphill, take off downhill; the forbidden directions are long enough for anything.
    up = direction("10", 600.0, slope_pct=2.0, takeoff=False)
    down = direction("28", 600.0, slope_pct=-2.0, landing=False)
    hour = air(0, 20)  # roll 240, to 50 ft 480, landing 370
    strip = perf.margins(PLAIN, field(up, down), hour)
    both_ways = perf.margins(
        PLAIN,
        field(
            replace(up, toda_m=9000.0, tora_m=9000.0, slope_pct=2.0),
            replace(down, lda_m=9000.0),
        ),
        hour,
    )
    assert strip.margin[0] == pytest.approx(600.0 / 480.0 - 1.0)
    assert both_ways.margin[0] == strip.margin[0]


def test_landing_uses_the_directions_open_for_landing_only():
    short, forbidden = direction("10", 400.0), direction("28", 9000.0, landing=False)
    got = perf.landing_margins(PLAIN, field(short, forbidden), air(0, 20))
    assert got[0] == pytest.approx(400 / 370 - 1)


def test_margins_most_favourable_direction_wins():
    short, long = direction("09", 450.0), direction("27", 900.0)
    for order in ((short, long), (long, short)):
        result = perf.margins(PLAIN, field(*order), air(0, 20))
        assert result.margin[0] == pytest.approx(900.0 / 480.0 - 1.0)
    assert perf.margins(PLAIN, field(short), air(0, 20)).shortfall[0]


def test_margins_do_not_mix_the_distances_of_two_directions():
    # Roll 240 m and 480 m to 50 ft: each direction is short of one of them.
    roll_short = direction("09", 1000.0, tora_m=200.0)
    climb_short = direction("27", 1000.0, toda_m=400.0)
    result = perf.margins(PLAIN, field(roll_short, climb_short), air(0, 20))
    assert result.shortfall[0]
    assert result.margin[0] == pytest.approx(max(200 / 240, 400 / 480) - 1.0)


def test_margins_landing_and_take_off_may_use_different_directions():
    result = perf.margins(
        PLAIN,
        field(direction("09", 1000.0, lda_m=100.0), direction("27", 1000.0, tora_m=100.0)),
        air(0, 20),
    )
    assert not result.shortfall[0]


def test_margins_each_distance_meets_its_own_declared_distance():
    # ICAO Annex 14: ground run against TORA, distance to 50 ft against TODA, landing against LDA.
    for name, need in (("tora_m", 240.0), ("toda_m", 480.0), ("lda_m", 370.0)):
        enough = perf.margins(PLAIN, field(direction(**{name: need})), air(0, 20))
        assert not enough.shortfall[0] and enough.margin[0] == 0.0
        result = perf.margins(PLAIN, field(direction(**{name: need - 1})), air(0, 20))
        assert result.shortfall[0]
        assert result.margin[0] == pytest.approx((need - 1) / need - 1)
    assert not perf.margins(PLAIN, field(direction(asda_m=1.0)), air(0, 20)).shortfall[0]


def test_margins_operators_factors_multiply_their_own_operation():
    strip = field(direction(length=500.0))
    take = perf.margins(replace(PLAIN, takeoff_factor=1.33), strip, air(0, 20))
    land = perf.margins(replace(PLAIN, landing_factor=1.43), strip, air(0, 20))
    assert take.margin[0] == pytest.approx(500 / (480 * 1.33) - 1)
    assert perf.CHECKS[take.limiting[0]] == "take-off to 50 ft"
    assert land.margin[0] == pytest.approx(500 / (370 * 1.43) - 1)
    assert perf.CHECKS[land.limiting[0]] == "landing from 50 ft"


# ---- climb and limits ------------------------------------------------------------------------


def test_climb_rate_margin_and_its_name():
    asked = replace(PLAIN, climb_rate_ft_min=500.0)
    result = perf.margins(asked, field(direction()), air([0, 4000], [0, 20]))
    assert result.margin.tolist() == pytest.approx([800 / 500 - 1, 400 / 500 - 1])
    assert result.shortfall.tolist() == [False, True]
    assert perf.CHECKS[result.limiting[1]] == "rate of climb"


def test_climb_not_asked_for_does_not_count():
    blank = replace(PLAIN, climb=(table({"rate_ft_min": [[np.nan] * 2, [-50, -50]]}),))
    assert not perf.margins(blank, field(direction()), air(4000, 20)).outside_table[0]


def test_climb_gradient_takes_the_true_airspeed():
    # True airspeed = indicated / sqrt(sigma), by definition of equivalent airspeed at low speed.
    asked = replace(PLAIN, climb_gradient_pct=5.0)
    hour = air(4000, 20)
    true_kt = 70.0 / np.sqrt(hour.density_ratio[0])
    feet_per_minute = true_kt * 1852.0 / 0.3048 / 60.0
    gradient_pct = 100.0 * 400.0 / feet_per_minute
    result = perf.margins(asked, field(direction(length=5000)), hour)
    assert result.margin[0] == pytest.approx(gradient_pct / 5.0 - 1.0, rel=1e-12)
    assert perf.CHECKS[result.limiting[0]] == "climb gradient"


def test_climb_gradient_of_several_masses_takes_the_fastest_speed():
    slow = table({"rate_ft_min": flat(500.0)}, mass_kg=600, speed_kt=60.0)
    fast = table({"rate_ft_min": flat(500.0)}, mass_kg=700, speed_kt=75.0)
    asked = replace(PLAIN, climb=(slow, fast), planning_kg=650.0, climb_gradient_pct=1.0)
    sea_level = air(0, 15)
    result = perf.climb_margins(asked, sea_level)[1][0]
    # 500 ft/min at 75 kt is 6.5832 % (row GRAD-1), the cautious one of the two speeds.
    assert result == pytest.approx(5.5832, abs=0.001)


@pytest.mark.parametrize(
    ("limit", "inside", "beyond", "name"),
    [
        ("limit_temperature_c", (0, 15.0), (0, 15.1), "temperature limit"),
        ("limit_density_altitude_ft", (2900, 10.0), (3000, 20.0), "density altitude limit"),
    ],
)
def test_limits_fall_short_only_once_passed(limit, inside, beyond, name):
    value = 15.0 if limit == "limit_temperature_c" else float(air(*inside).density_altitude_ft[0])
    limited = replace(PLAIN, **{limit: value})
    assert not perf.margins(limited, field(direction(length=5000)), air(*inside)).shortfall[0]
    passed = perf.margins(limited, field(direction(length=5000)), air(*beyond))
    assert passed.shortfall[0] and not passed.outside_table[0]
    assert perf.CHECKS[passed.limiting[0]] == name
    # The margin stays that of the performance checks.
    assert passed.margin[0] > 0


def test_temperature_limit_is_of_the_air_and_not_of_the_table_entry():
    humid = replace(air(0, 15), table_temperature_c=np.array([18.0]))
    limited = replace(PLAIN, limit_temperature_c=15.0)
    assert not perf.margins(limited, field(direction(length=5000)), humid).shortfall[0]


def test_outside_the_table_is_a_shortfall_whatever_the_runway():
    hours = air([0, 0, 4500], [20.0, 21.0, 10.0])
    result = perf.margins(PLAIN, field(direction(length=10_000)), hours)
    assert result.outside_table.tolist() == [False, True, True]
    assert result.shortfall.tolist() == [False, True, True]
    assert result.margin.tolist()[1:] == [-1.0, -1.0]


@pytest.mark.parametrize("operation", ["takeoff", "landing", "climb"])
def test_outside_any_one_table_is_outside(operation):
    quantities = getattr(PLAIN, operation)[0].values
    cold = table(quantities, t=(-20, 0), speed_kt=70.0)
    profile = replace(PLAIN, climb_rate_ft_min=100.0, **{operation: (cold,)})
    result = perf.margins(profile, field(direction(length=10_000)), air(0, 10))
    assert result.outside_table[0] and result.shortfall[0]


# ---- scaled profiles -------------------------------------------------------------------------


def test_scaled_distances_follow_their_own_powers():
    profile = scaled_profile(
        770.0,
        takeoff_ground_roll_m=200.0,
        takeoff_distance_50ft_m=400.0,
        landing_distance_50ft_m=350.0,
    )
    hour = replace(air(0, 15), density_ratio=np.array([0.8]))
    got = [
        perf.required(profile, operation, quantity, hour)[0]
        for operation, quantity in (
            ("takeoff", "ground_roll_m"),
            ("takeoff", "distance_50ft_m"),
            ("landing", "distance_50ft_m"),
        )
    ]
    # Exponents n and m of the project's method: roll 2 and 2.3, to 50 ft 2 and 3, landing 1 and
    # 1.5 (engineering judgement; the brackets are tested above).
    expected = [200 * 1.1**2 * 0.8**-2.3, 400 * 1.1**2 * 0.8**-3.0, 350 * 1.1 * 0.8**-1.5]
    assert got == pytest.approx(expected, rel=1e-12)


def test_scaled_figures_give_no_credit_for_dense_air_or_low_mass():
    assert scaled_roll(600.0, 1.1, 200.0) == 200.0


def test_scaled_profile_without_a_ground_roll_rests_on_the_distance_to_50_ft():
    profile = scaled_profile(takeoff_distance_50ft_m=400.0, landing_distance_50ft_m=100.0)
    result = perf.margins(profile, field(direction(length=500.0)), air(0, 15))
    assert result.margin[0] == pytest.approx(500 / 400 - 1)


def test_scaled_climb_falls_to_nothing_at_the_absolute_ceiling():
    # ROC(DA) = ROC0 (1 - DA / ceiling): the linear decay of a naturally aspirated piston engine.
    profile = scaled_profile(climb_rate_ft_min=800.0, absolute_ceiling_ft=16_000.0)
    hour = replace(air(0, 15), density_altitude_ft=np.array([8000.0]))
    assert perf.required(profile, "climb", "rate_ft_min", hour)[0] == 400.0
    hour = replace(hour, density_altitude_ft=np.array([16_000.0]))
    assert perf.required(profile, "climb", "rate_ft_min", hour)[0] == 0.0
    hour = replace(hour, density_altitude_ft=np.array([-3000.0]))
    assert perf.required(profile, "climb", "rate_ft_min", hour)[0] == 800.0
    heavy = replace(profile, planning_kg=701.0)
    assert np.isnan(perf.required(heavy, "climb", "rate_ft_min", hour)[0])


# ---- what must hold for every aircraft, strip and hour ---------------------------------------

rises = st.lists(st.floats(0.0, 300.0), min_size=9, max_size=9)


def monotone(first, steps, direction_=1):
    """Return a 3 x 3 grid that rises (or falls) along both axes."""
    grid = np.array(steps).reshape(3, 3).cumsum(axis=0).cumsum(axis=1)
    return first + direction_ * grid


@st.composite
def fleets(draw):
    """Draw an invented aircraft whose tables obey the rules of the contract, and a strip."""
    axes = {"pa": (0.0, 3000.0, 8000.0), "t": (-10.0, 15.0, 35.0)}
    roll, to_50ft = monotone(150.0, draw(rises)), monotone(300.0, draw(rises))
    landing, rate = monotone(300.0, draw(rises)), monotone(1200.0, draw(rises), -1)
    heavier = draw(st.floats(1.0, 1.5))
    profile = replace(
        PLAIN,
        takeoff=tuple(
            takeoff(roll * k, to_50ft * k, mass_kg=m, **axes)
            for k, m in ((1.0, 600.0), (heavier, 800.0))
        ),
        landing=(table({"distance_50ft_m": landing}, mass_kg=800.0, **axes),),
        climb=(table({"rate_ft_min": rate}, mass_kg=800.0, speed_kt=70.0, **axes),),
        climb_rate_ft_min=300.0,
        climb_gradient_pct=3.0,
        takeoff_factor=draw(st.floats(1.0, 1.5)),
        landing_factor=draw(st.floats(1.0, 1.5)),
        planning_kg=draw(st.floats(550.0, 800.0)),
        limit_temperature_c=draw(st.none() | st.floats(20.0, 45.0)),
        limit_density_altitude_ft=draw(st.none() | st.floats(3000.0, 12_000.0)),
    )
    strip = direction(
        length=draw(st.floats(200.0, 2500.0)),
        slope_pct=draw(st.floats(-3.0, 3.0)),
        surface=draw(st.sampled_from(sorted(perf.TAKEOFF_SURFACE))),
    )
    return profile, strip


PA, T = (x.ravel() for x in np.meshgrid(np.linspace(-500, 8500, 10), np.linspace(-20, 38, 13)))
HOURS = air(PA, T)


def assert_never_better(worse, better):
    """Every shortfall stays one, and no margin grows, apart from the fixed one outside a table.

    Below -1 the aircraft sinks: thinner air makes it sink along a shallower path, so no order.
    """
    assert (worse.shortfall >= better.shortfall).all()
    both = ~worse.outside_table & ~better.outside_table
    worse_margin, better_margin = (np.maximum(m.margin[both], -1.0) for m in (worse, better))
    assert (worse_margin <= better_margin + 1e-12).all()


@settings(deadline=None)
@given(fleets(), st.floats(1.0, 1.8))
def test_longer_runway_never_raises_the_shortfall(fleet, factor):
    profile, strip = fleet
    longer = replace(strip, **{f"{d}_m": factor * strip.tora_m for d in ("tora", "toda", "lda")})
    assert_never_better(
        perf.margins(profile, field(strip), HOURS), perf.margins(profile, field(longer), HOURS)
    )


@settings(deadline=None)
@given(fleets(), st.floats(0.0, 300.0))
def test_more_mass_never_lowers_the_shortfall(fleet, more_kg):
    profile, strip = fleet
    heavy = replace(profile, planning_kg=profile.planning_kg + more_kg)
    assert_never_better(
        perf.margins(heavy, field(strip), HOURS), perf.margins(profile, field(strip), HOURS)
    )


@settings(deadline=None)
@given(fleets(), st.floats(0.0, 15.0))
def test_warmer_never_lowers_the_shortfall(fleet, warmer_k):
    profile, strip = fleet
    assert_never_better(
        perf.margins(profile, field(strip), air(PA, T + warmer_k)),
        perf.margins(profile, field(strip), HOURS),
    )


@settings(deadline=None)
@given(fleets(), st.floats(0.0, 3000.0))
def test_higher_never_lowers_the_shortfall(fleet, higher_ft):
    profile, strip = fleet
    assert_never_better(
        perf.margins(profile, field(strip), air(PA + higher_ft, T)),
        perf.margins(profile, field(strip), HOURS),
    )


@settings(deadline=None)
@given(fleets())
def test_another_direction_never_raises_the_shortfall(fleet):
    profile, strip = fleet
    other = replace(strip, runway="27", slope_pct=-strip.slope_pct, tora_m=700.0)
    assert_never_better(
        perf.margins(profile, field(strip), HOURS),
        perf.margins(profile, field(strip, other), HOURS),
    )


@settings(deadline=None)
@given(fleets())
def test_shortfall_is_a_negative_margin_a_passed_limit_or_outside_the_table(fleet):
    profile, strip = fleet
    result = perf.margins(profile, field(strip), HOURS)
    limits = np.zeros(len(PA), bool)
    if profile.limit_temperature_c is not None:
        limits |= profile.limit_temperature_c < HOURS.temperature_c
    if profile.limit_density_altitude_ft is not None:
        limits |= profile.limit_density_altitude_ft < HOURS.density_altitude_ft
    expected = result.outside_table | (result.margin < 0) | limits
    np.testing.assert_array_equal(result.shortfall, expected)
    beyond = (PA > 8000) | (T > 35) | (profile.planning_kg > 800)
    np.testing.assert_array_equal(result.outside_table, beyond)
