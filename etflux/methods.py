"""What is computed by which published method, for the brief's sheet of methods."""

METHODS = (
    ("Reference ET", "Grass reference evapotranspiration, daily", "FAO-56 eq. 6; ASCE-EWRI (2005) eq. 1"),
    ("Radiation", "Extraterrestrial, clear-sky, net shortwave and longwave", "FAO-56 eqs. 21, 37, 38, 39"),
    ("Humidity", "Vapour pressure by the first form at hand", "FAO-56 eqs. 12, 14, 17, 18, 19, 48"),
    ("Missing weather", "Neighbour, sunshine, temperature range, mean, default; every value labelled", "FAO-56 ch. 3"),
    (
        "Weather checks",
        "Ranges, order, repeated values, clear-sky comparison",
        "ASCE-EWRI (2005) app. D; FAO-56 annex 5",
    ),
    ("Growth stages", "Heat units 10/30 °C, day lengths, freezes, observed dates", "extension tables; FAO-56 table 11"),
    (
        "Crop coefficients",
        "Basal coefficients, adjusted by the stage's wind and humidity",
        "FAO-56 tables 17, 12; eqs. 66, 70",
    ),
    ("Roots and height", "Grow with the basal coefficient", "FAO-56 annex 8; tables 12, 22"),
    ("Ground cover", "From the basal coefficient and height; a sod's own", "FAO-56 eq. 76"),
    ("Evaporation", "Drying layer in two stages, exposed and wetted share, residue", "FAO-56 eqs. 71 to 79; ch. 11"),
    (
        "Runoff",
        "Curve number by the wetness of the drying layer",
        "NEH-630 ch. 9 and 10; Hawkins et al. 1985; ASCE Manual 70",
    ),
    ("Root zone", "Available water, depletion, stress", "FAO-56 eqs. 82 to 85"),
    ("Latent flux", "Latent heat of vaporization times water use", "FAO-56 annex 3 eq. 3-1 (Harrison 1963)"),
    ("Course of the day", "Evaporative fraction kept through the day", "Shuttleworth et al. 1989; Crago 1996"),
    ("Mixing depth", "Zero-order slab with entrainment on the morning profile", "Tennekes 1973; Driedonks 1982"),
    ("Condensation level", "Lifting condensation level of the mixed air", "Bolton 1980 eq. 15"),
    ("Contribution", "Dew point with and without the tagged water, shared in proportion", "definition of this project"),
)
