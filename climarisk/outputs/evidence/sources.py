"""What the method rests on, for the method statement: equations, decisions, factors, limits.

Each figure is taken from the module that uses it.  How a source is known is told beside it:
`READ`, `RECALLED`, `DERIVED`, `CHOSEN`.
"""

from __future__ import annotations

from climarisk.atmosphere import (
    EPSILON,
    G0,
    LAPSE_K_PER_M,
    P0_HPA,
    R_DRY,
    RHO0,
    T0_K,
    TROPOPAUSE_M,
    VAPOUR_K_PER_HPA,
)
from climarisk.daylight import CIVIL_TWILIGHT_DEG
from climarisk.extremes import MINIMUM_MAXIMA
from climarisk.lapse import MINIMUM_SPAN_M, MINIMUM_STATIONS
from climarisk.occasions import HALF_WINDOW_DAYS
from climarisk.performance import (
    LANDING_SURFACE,
    OUTSIDE_MARGIN,
    SLOPE_PER_PCT,
    TAKEOFF_SURFACE,
)
from climarisk.pressure import BAROMETER_HPA, SYNOPTIC_SD_HPA
from climarisk.quality import RANGES
from climarisk.risk import RESAMPLES
from climarisk.rules import DAYS, MONTH, YEARS
from climarisk.scenarios import REGULATORY_TAKEOFF
from climarisk.schedule import MOST_SHIFT_H
from climarisk.transfer import MAXIMUM_HEIGHT_DIFFERENCE_M, ON_SPOT_KM, ON_SPOT_M
from climarisk.transfer_error import BASE_SD_K, HEIGHT_SD_K_PER_KM, LEVELS
from climarisk.trend import TREND_YEARS
from climarisk.weights import BIN_KG

#: How a source is known.
READ = "read in the source, or in a copy of the part used"
RECALLED = "from memory, not read: hold it against the document before relying on it"
DERIVED = "derived here from the figures above, no source needed"
CHOSEN = "our own choice, no source"

#: What each equation is, and where it comes from: quantity, equation, source, how known.
EQUATIONS = (
    (
        "Standard atmosphere",
        f"T = {T0_K:g} K - {1000 * LAPSE_K_PER_M:g} K/km H up to "
        f"{TROPOPAUSE_M:,.0f} m, isothermal above; p0 = {P0_HPA:g} hPa, "
        f"g0 = {G0:g} m/s2, R = {R_DRY:g} J/(kg K), density at sea level "
        f"p0/(R T0) = {RHO0:.4g} kg/m3",
        "ISO 2533:1975; ICAO Doc 7488/3 (1993)",
        "the documents from memory; the constants checked against a library that implements them",
    ),
    (
        "Pressure altitude",
        "the altitude at which the standard atmosphere has the pressure: "
        "H = (T0/L)(1 - (p/p0)^(R L/g0))",
        "inverse of the standard atmosphere",
        DERIVED,
    ),
    (
        "Density altitude",
        "the altitude at which the standard atmosphere has the density of the moist air: "
        "H = (T0/L)(1 - (rho/rho0)^(1/(g0/(R L) - 1))), rho = p/(R Tv)",
        "exact inverse of the standard atmosphere; 0 ft at its sea level",
        DERIVED,
    ),
    (
        "Virtual temperature",
        f"Tv = T/(1 - {1 - EPSILON:.5f} e/p), ratio of molar masses {EPSILON:g}",
        "WMO-No. 8 (2008), annex 4.A",
        READ,
    ),
    (
        "Saturation vapour pressure",
        "a exp(b t/(c + t)) over water at every temperature, times its enhancement factor, which "
        "grows with pressure; coefficients of 1981",
        "Buck (1981), Journal of Applied Meteorology 20, 1527-1532",
        "the coefficients read; the range of -20 to 50 degC from memory",
    ),
    (
        "Altimeter setting (QNH) to pressure",
        "through the standard atmosphere, exactly",
        "definition of the altimeter setting",
        DERIVED,
    ),
    (
        "Sea-level pressure to pressure",
        "an inverse fitted per station and month where a measured kind overlaps; else "
        "MSLP = p exp[(g0/R) H/(T + L H/2 + Ch e)] with the mean of now and 12 hours ago, "
        f"Ch = {VAPOUR_K_PER_HPA:g} K/hPa",
        "WMO-No. 8 practice, as the German weather service prints it in its BUFR guide",
        READ,
    ),
    (
        "Vapour pressure with height",
        "e falls exponentially, by month",
        "Liston and Elder (2006) after Kunkel (1989)",
        READ,
    ),
    (
        "Daylight",
        f"the sun's centre no more than {-CIVIL_TWILIGHT_DEG:g} degrees below the horizon",
        "Meeus (1998), Astronomical Algorithms, chapters 25 and 28; ICAO Annex 1, night",
        RECALLED,
    ),
    (
        "Engine power",
        "P/P0 = s - (1 - s)/7.55 with s the ratio of the dry air's density; the optimistic figure "
        "is the inverse of the correction factor of a test code",
        "Gagg and Ferrar (1934), with Brooks and Garlock, NACA TR-426, for the dry air; SAE J1349",
        "the constant of Gagg and Ferrar from memory, the others read in abstracts and excerpts",
    ),
    (
        "Percentiles",
        "of hourly values, definition 8: position p (n + 1/3) + 1/3",
        "Hyndman and Fan (1996), The American Statistician 50, 361-365",
        "the definition checked against a library that implements it",
    ),
    (
        "Intervals",
        f"{RESAMPLES:,} resamples of whole years, the same for every field and aircraft; expanded "
        "percentiles",
        "Hesterberg (2015), The American Statistician 69, 371-386",
        "the coverage tested by simulation",
    ),
    (
        "Trends",
        f"Theil-Sen slope with Sen's interval, Mann-Kendall test, from {TREND_YEARS} years "
        "on; variance corrected for autocorrelation",
        "Sen (1968); Mann (1945); Kendall (1975); Hamed and Rao (1998), Journal of Hydrology 204, "
        "182-196, with a bias-corrected autocorrelation",
        "checked against a library that implements the test",
    ),
    (
        "Steps beside a trend",
        "largest F statistic of a step at an unknown year, common trend allowed",
        "Wang (2003), Journal of Climate 16, 3383-3385",
        "the critical values simulated here",
    ),
    (
        "Return levels",
        f"generalised extreme-value distribution by L-moments, from {MINIMUM_MAXIMA} "
        "annual maxima on, to twice the length of the record",
        "Hosking, Wallis and Wood (1985), Technometrics 27, 251-261",
        "checked against a library that implements the distribution",
    ),
)

#: The decisions that shape the figures.
DECISIONS = (
    "Performance tables are entered with pressure altitude and temperature, the handbook's axes. "
    "Humidity enters through the virtual temperature in place of the air temperature where "
    "humidity_in_tables is set, which gives the table the same density; the further loss of power "
    "in moist air is not in it. Stated limits are held against the air temperature.",
    "Nothing is calculated beyond a table: hotter, higher or heavier is a shortfall with a margin "
    f"of {OUTSIDE_MARGIN:g}. Colder or lower takes the first column or row: no credit.",
    "Between tabulated values of pressure altitude, temperature and mass everything is linear.",
    "The most favourable direction that may be used is taken hour by hour, for take-off and "
    "landing apart, in still air.",
    "The ground roll is held against TORA, the distance to 50 ft against TODA, the landing "
    "distance from 50 ft against LDA; distances that are not declared come from the length.",
    "Months and hours are local standard time. Every hour gives its own density altitude and its "
    "own margins; only then are percentiles and shares taken.",
    "A pressure is taken from the best kind there is: station pressure, altimeter setting, "
    "sea-level pressure, the region's mean. A station whose pressure contradicts its elevation "
    "gives no pressure, and temperature only to a field of the same elevation.",
    f"A field's own station (within {ON_SPOT_KM:g} km and {ON_SPOT_M:g} m) "
    "stands alone where it has a value. Otherwise stations around are blended, nearer and level "
    "ones weighing more, none more than "
    f"{MAXIMUM_HEIGHT_DIFFERENCE_M:,.0f} m higher or lower.",
    "Temperature is carried by a lapse for each month and hour, fitted by robust regression from "
    f"{MINIMUM_STATIONS} stations that span {MINIMUM_SPAN_M:g} m, drawn towards a "
    "day and night table where they say little.",
    "What carried air may be wrong by is learned by hiding the stations near the fields "
    f"(verification.txt). Percentiles, shares and intervals hold its {LEVELS} "
    "equally likely levels; without stations to hide, planning values of "
    f"{BASE_SD_K:g} K and {HEIGHT_SD_K_PER_KM:g} K per km of height "
    "stand in (our choice).",
    f"A year counts for a month and hour when {100 * DAYS.share_of_days:g} % of its days have a "
    f"value ({DAYS.source}). A month of a year is patchy from {MONTH.missing_days} missing days, "
    f"or {MONTH.consecutive_days} in a row, on ({MONTH.source}).",
    f"Percentiles from fewer than {YEARS.percentiles} years are marked, the outer ones from fewer "
    f"than {YEARS.extreme_percentiles}; below {YEARS.interval} years there is no interval, below "
    f"{YEARS.settled_interval} it is marked ({YEARS.source}).",
    "The mass that holds is looked for up to the maximum mass and the heaviest table of each "
    "operation, never below the empty mass; an hour in which no tabulated mass would do counts as "
    "one without a mass. Landing is reckoned at the mass of the take-off. Its interval resamples "
    f"whole years and the persistent part of the error, to {BIN_KG:g} kg, widened outwards.",
    "An hour of the day is usable where its shortfall share is below the target and the hours "
    "window holds it on some day of the month. A day has a run where enough hours in a row, inside "
    "the window, do not fall short; an hour without a value breaks a run.",
    "Fields are ranked as bases by usable hours a month: the mean over the twelve months of the "
    "hours that the window offers times one less the shortfall share, and of the fleet the mean "
    "over its aeroplanes. A difference of two fields resamples the same years for both and leaves "
    "out what may persist in the error of carried air; each field is judged by its own years.",
    "For a date of the schedule stand the hours of the record at its hour of local standard time "
    f"on the {2 * HALF_WINDOW_DAYS + 1} days around it, in every year. Every date counts the same; "
    "flights expected to fall short are their number times the share. The flights have their "
    "weather in common, so that years are resampled for all of them together. Another clock time "
    f"is looked for up to {MOST_SHIFT_H} hours to either side.",
    "Carburettor icing is told of daylight hours, by zones of temperature and dew point of the "
    "surface air, or where the study asks for it by a screening: the vapour beyond saturation over "
    "ice in a throat colder than the air by an assumed drop, which is no published chart.",
    "Quality control is gross on purpose: ranges, single-hour spikes, values stuck for days, "
    "default pressures. An odd hour that could be weather stays.",
)

#: What is recalled and stands in no table of the statement.
RECALLED_BESIDES = (
    f"Error of a barometer, {BAROMETER_HPA:g} hPa: WMO-No. 8, operational uncertainty.",
    f"Spread of QNH from day to day where nothing is known, {SYNOPTIC_SD_HPA:g} hPa: the upper "
    "end of 3 to 5 hPa.",
    "Ranges outside which a value is rejected, air temperature "
    f"{RANGES['temperature_c'][0]:g} to {RANGES['temperature_c'][1]:g} degC, dew point "
    f"{RANGES['dew_point_c'][0]:g} to {RANGES['dew_point_c'][1]:g} degC, sea-level pressure "
    f"{RANGES['sea_level_pressure_hpa'][0]:g} to {RANGES['sea_level_pressure_hpa'][1]:g} hPa: "
    "beyond the extremes in the archive of the World Meteorological Organization, and beyond a "
    "record dew point.",
    "How far the mean sea-level pressure strays at high latitudes, up to some 30 hPa: the "
    "allowance for the pressure of a station without a neighbour there.",
    f"Thresholds of counting days: {DAYS.source}.",
    f"Thresholds of patchy months: {MONTH.source}.",
)

_LEAFLET = "UK CAA Safety Sense Leaflet 7c (2013)"
_SURFACE_SOURCES = {
    "paved": ("reference surface", DERIVED),
    "gravel": ("NZ CAA AC91-3 (1997), metal surface", RECALLED),
}


def surface_factors() -> list[tuple[str, float, float, str, str]]:
    """Surface, factor on take-off and on landing, source, how known."""
    return [
        (
            surface,
            factor,
            LANDING_SURFACE[surface],
            *_SURFACE_SOURCES.get(surface, (_LEAFLET, RECALLED)),
        )
        for surface, factor in TAKEOFF_SURFACE.items()
    ]


#: Other factors: what, factor, source, how known.
OTHER_FACTORS = (
    (
        "Slope, each 1 % uphill in take-off or downhill in landing; no credit the other way",
        f"+{100 * SLOPE_PER_PCT:g} %",
        "AMC2 CAT.POL.A.305 and AMC2 CAT.POL.A.430 to Regulation (EU) 965/2012; demonstrated data "
        "are needed above 2 %",
        READ,
    ),
    (
        "Sensitivity “regulatory factors”, take-off",
        f"{REGULATORY_TAKEOFF:g}",
        "CAT.POL.A.305, performance class B, without stopway and clearway. Where TODA exceeds "
        "TORA the rule has another form, which is not applied here",
        READ,
    ),
    (
        "Sensitivity “regulatory factors”, landing",
        "1/0.7",
        "CAT.POL.A.330, dry runway: within 70 % of the landing distance available. On a wet runway "
        "the rule asks for more, which is not applied here",
        READ,
    ),
)

#: Words for the exponents of scaled profiles: what is scaled.
SCALED = {
    "ground_roll_m": "take-off ground roll",
    "distance_50ft_m": "take-off distance to 50 ft",
    "landing_distance_50ft_m": "landing distance from 50 ft",
}

#: What each group of scenarios changes.
SENSITIVITY = (
    (
        "air +1 K, +2 K, +3 K",
        "The air at every field is warmer in every hour, relative humidity and pressure unchanged. "
        "A question, not a forecast.",
    ),
    (
        "mass -5 %, +5 %",
        "The planning mass of every aircraft, within its empty and its maximum mass; the "
        "scenario's name tells where that stopped it, and where the mass is above the heaviest "
        "table, so that every hour falls short.",
    ),
    (
        "factors 1.0",
        "Take-off and landing distance without the operator's factors: what the tables say by "
        "themselves. No recommendation. Factors of surface and slope stay.",
    ),
    (
        "regulatory factors",
        "In place of the operator's factors, those of commercial air transport in performance "
        "class B. Factors of surface and slope stay. They are no statement that the operation is "
        "one to which the rule applies, or that it complies.",
    ),
)

#: What the evidence cannot show, beside the cautions that every output has.
LIMITS = (
    "The digests show that nothing changed since the evidence was written. They do not show who "
    "wrote it, nor that the station archives, runway data and handbook figures were right.",
    "Still air is assumed: wind is in none of the figures. Neither are the state of engine and "
    "airframe, the skill of the pilot, obstacles beyond the runway, nor turbulence.",
    "A change of climate is in the record only as far as it has happened; trends.csv tells what "
    "the record shows, and the sensitivity to warmer air what it would mean.",
    "Hiding stations measures how well air is carried between stations. A strip in a closed "
    "valley or on a ridge may be further off than any station, most of all at night.",
    "A station that moved, or that was given a wrong elevation or clock, is found only where its "
    "neighbours or its own pressure give it away.",
)
