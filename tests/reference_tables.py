"""Tables of published values, each with its source. Nothing here is computed by the package."""

from __future__ import annotations

# Extraterrestrial radiation of the 15th of each month, MJ m-2 d-1, January to December.
# Allen et al. (1998), FAO Irrigation and Drainage Paper 56, Annex 2, Table 2.6.
FAO56_DAYS = (15, 46, 74, 105, 135, 166, 196, 227, 258, 288, 319, 349)
FAO56_RADIATION = {
    0: (36.2, 37.5, 37.9, 36.8, 34.8, 33.4, 33.9, 35.7, 37.2, 37.4, 36.3, 35.6),
    10: (31.9, 34.5, 36.9, 37.9, 37.6, 37.0, 37.1, 37.5, 37.1, 35.1, 32.4, 31.0),
    20: (26.8, 30.6, 34.7, 37.9, 39.3, 39.5, 39.3, 38.3, 35.8, 31.8, 27.7, 25.6),
    30: (21.1, 25.8, 31.4, 36.8, 40.0, 41.2, 40.6, 38.0, 33.4, 27.6, 22.2, 19.8),
    40: (15.0, 20.4, 27.2, 34.7, 39.7, 41.9, 40.8, 36.7, 30.0, 22.5, 16.3, 13.6),
    50: (8.9, 14.4, 22.2, 31.5, 38.5, 41.7, 40.2, 34.4, 25.7, 16.9, 10.2, 7.5),
    60: (3.3, 8.3, 16.6, 27.5, 36.6, 41.2, 39.2, 31.3, 20.6, 10.9, 4.4, 2.2),
    70: (0.0, 2.6, 10.4, 23.0, 35.2, 42.5, 39.4, 28.0, 14.9, 4.9, 0.1, 0.0),
    -10: (39.5, 39.3, 37.8, 34.6, 31.1, 29.1, 29.8, 32.8, 36.3, 38.5, 39.3, 39.4),
    -20: (41.9, 40.0, 36.6, 31.3, 26.6, 24.1, 25.0, 28.9, 34.2, 38.6, 41.2, 42.1),
    -30: (43.1, 39.6, 34.3, 27.2, 21.4, 18.5, 19.6, 24.3, 31.1, 37.5, 42.0, 43.9),
    -40: (43.4, 38.1, 30.9, 22.3, 15.8, 12.8, 13.9, 19.1, 27.1, 35.3, 41.8, 44.6),
    -50: (42.7, 35.6, 26.6, 16.7, 10.0, 7.1, 8.2, 13.4, 22.2, 32.1, 40.6, 44.5),
    -60: (41.5, 32.3, 21.5, 10.8, 4.4, 2.0, 2.9, 7.6, 16.7, 28.1, 38.7, 43.9),
    -70: (41.4, 28.6, 15.8, 4.9, 0.2, 0.0, 0.0, 2.2, 10.7, 23.5, 37.3, 45.3),
}

# Daylight hours of the same days, northern latitudes. FAO-56, Annex 2, Table 2.7.
FAO56_DAYLIGHT = {
    0: (12.0,) * 12,
    10: (11.5, 11.7, 11.9, 12.2, 12.5, 12.6, 12.5, 12.3, 12.1, 11.8, 11.5, 11.4),
    20: (10.9, 11.3, 11.9, 12.5, 12.9, 13.2, 13.1, 12.7, 12.1, 11.5, 11.0, 10.8),
    30: (10.3, 11.0, 11.8, 12.7, 13.5, 13.9, 13.8, 13.1, 12.2, 11.3, 10.5, 10.1),
    40: (9.5, 10.5, 11.7, 13.1, 14.2, 14.8, 14.6, 13.6, 12.2, 10.9, 9.7, 9.2),
    50: (8.3, 9.8, 11.6, 13.5, 15.2, 16.1, 15.7, 14.3, 12.3, 10.4, 8.7, 7.9),
    60: (6.4, 8.8, 11.4, 14.2, 16.8, 18.4, 17.7, 15.3, 12.5, 9.7, 7.1, 5.6),
    70: (0.0, 6.6, 11.0, 15.6, 21.3, 24.0, 24.0, 17.6, 12.8, 8.3, 2.3, 0.0),
}

# Monthly mean daily extraterrestrial radiation, MJ m-2 d-1: mean over every day of the month.
# Duffie & Beckman (2013), Solar Engineering of Thermal Processes, Table 1.10.1.
# Four of the printed figures (85°N March and September, 90°S March, September and October) have
# not been seen in a second place and are left out (None).
DUFFIE_BECKMAN_RADIATION = {
    85: (0, 0, None, 19.2, 37.0, 44.7, 41.0, 26.4, None, 0, 0, 0),
    45: (12.2, 17.4, 25.1, 33.2, 39.2, 41.7, 40.4, 35.3, 27.8, 19.6, 13.3, 10.7),
    30: (21.3, 25.7, 31.5, 36.8, 40.0, 41.1, 40.4, 37.8, 33.2, 27.4, 22.2, 19.9),
    15: (29.6, 32.6, 35.9, 38.0, 38.5, 38.4, 38.3, 38.0, 36.4, 33.4, 30.1, 28.5),
    0: (36.2, 37.4, 37.8, 36.7, 34.8, 33.5, 34.0, 35.7, 37.2, 37.3, 36.3, 35.7),
    -10: (39.5, 39.3, 37.7, 34.5, 31.1, 29.2, 29.9, 32.9, 36.3, 38.5, 39.3, 39.4),
    -45: (42.8, 37.1, 28.6, 19.6, 12.9, 10.0, 11.3, 16.6, 24.9, 34.0, 41.2, 44.5),
    -60: (41.0, 32.4, 21.2, 10.9, 4.5, 2.2, 3.1, 8.0, 17.0, 28.4, 38.7, 43.7),
    -90: (43.3, 27.8, None, 0, 0, 0, 0, 0, None, None, 39.4, 47.8),
}

# Klein (1977), Solar Energy 19: the day whose declination stands for its month, as in Duffie &
# Beckman Table 1.6.1; the declinations (degrees) FROM MEMORY.
KLEIN_DAYS = (17, 47, 75, 105, 135, 162, 198, 228, 258, 288, 318, 344)
KLEIN_DECLINATIONS = (-20.9, -13.0, -2.4, 9.4, 18.8, 23.1, 21.2, 13.5, 2.2, -9.6, -18.9, -23.0)

# Duffie & Beckman (2013), Example 2.19.1: Madison, 43°N, panel at 60° to the south.
MADISON_LATITUDE = 43.0
MADISON_TILT = 60.0
MADISON_EXTRATERRESTRIAL = (
    *(13.37, 18.81, 26.03, 33.78, 39.42, 41.78),
    *(40.56, 35.92, 28.80, 20.90, 14.62, 11.91),
)
MADISON_HORIZONTAL = (
    *(6.44, 9.89, 12.86, 16.05, 21.36, 23.04),
    *(22.58, 20.33, 14.59, 10.48, 6.37, 5.74),
)
MADISON_GROUND = (0.7, 0.7, 0.4, 0.2, 0.2, 0.2, 0.2, 0.2, 0.2, 0.2, 0.2, 0.4)
MADISON_BEAM_RATIO = (2.79, 2.04, 1.42, 0.96, 0.71, 0.62, 0.66, 0.84, 1.21, 1.81, 2.56, 3.06)
MADISON_TILTED = (13.7, 17.2, 15.8, 14.7, 16.6, 16.5, 16.8, 17.5, 15.6, 15.2, 11.4, 12.7)

# Rows of the spreadsheet published with Bird & Hulstrom (1981), SERI/TR-642-761 (version of
# 16 August 2012), 1 January: zenith angle; beam normal, beam horizontal, global, diffuse (W m-2).
# Inputs: 840 hPa, ozone 0.3 cm, water 1.5 cm, aerosol depth 0.15 at 380 nm and 0.1 at 500 nm,
# forward share 0.85, ground albedo 0.2, extraterrestrial 1414.91335 W m-2.
BIRD_EXTRATERRESTRIAL = 1414.91335
BIRD_ROWS = {
    9: (80.20294173, 492.188, 83.751, 135.705, 51.954),
    11: (66.6756093, 770.273, 304.980, 391.627, 86.648),
    13: (63.37408378, 806.678, 361.524, 452.980, 91.456),
}
BIRD_ROW_13 = {
    "air_mass": 2.22096,
    "rayleigh": 0.861465,
    "ozone": 0.971191,
    "mixed_gases": 0.985225,
    "water": 0.874648,
    "aerosol": 0.818451,
    "aerosol_absorption": 0.979868,
    "sky_albedo": 0.093210,
}

# Shortwave budgets, W m-2: incoming, reflected at the top, down and up at the surface; then what
# the single-layer model (Donohoe & Battisti 2011) makes of them: reflectance R, transmittance T,
# escape of ground light T/(1 − αR). Fluxes of the first four FROM MEMORY; the last two are means
# of the open ACCESS-ESM1-5 CMIP6 fields at the equator.
SHORTWAVE_BUDGETS = {
    "clear, Wild et al. 2019": (340, 53, 247, 33, 0.086, 0.718, 0.726),
    "all-sky, Wild et al. 2015": (340, 100, 185, 25, 0.256, 0.525, 0.544),
    "all-sky, Stephens et al. 2012": (340.2, 100, 188, 23, 0.258, 0.535, 0.553),
    "all-sky, Trenberth et al. 2009": (341.3, 101.9, 184, 23, 0.263, 0.521, 0.539),
    "clear, ACCESS-ESM1-5": (417.1, 47.0, 289.8, 16.2, None, 0.691, 0.695),
    "all-sky, ACCESS-ESM1-5": (417.1, 110.6, 218.8, 12.7, None, None, 0.525),
}

# An independent ray model on Bird & Hulstrom's transmittances (water 1.5 cm, aerosol 0.076): the
# direct part plus half of the Rayleigh and 78 % of the aerosol scattering goes on upward.
# (zenith down, zenith up): unscattered share, total share.
RAY_MODEL = {
    (0, 0): (0.80, 0.90),
    (30, 30): (0.78, 0.89),
    (60, 30): (0.79, 0.90),
    (60, 60): (0.68, 0.85),
    (75, 45): (0.76, 0.89),
}
RAY_MODEL_GREY_TOTAL = {
    (0, 0): 0.81,
    (30, 30): 0.80,
    (60, 30): 0.80,
    (60, 60): 0.74,
    (75, 45): 0.78,
}

# Diffuse fraction by clearness index. Erbs, Klein & Duffie (1982), Solar Energy 28; Orgill &
# Hollands (1977), Solar Energy 19.
ERBS = {0.2: 0.982, 0.3: 0.9486, 0.4: 0.8400, 0.5: 0.6591, 0.6: 0.4395, 0.7: 0.2440, 0.8: 0.1653}
ORGILL_HOLLANDS = {0.3: 0.9253, 0.5: 0.637, 0.7: 0.269}

# Best tilt (degrees) and annual mean flux (W m-2) of a perfect mirror without air on black ground,
# real orbit, 1361 W m-2: brute force over 365 days in steps of 1°. The last column is the best
# tilt if rays reflected downward counted too (a collector).
NO_AIR = {
    0: (0.0, 415.6, 0.0),
    15: (13.5, 414.4, 14.5),
    30: (26.5, 410.3, 28.5),
    45: (39.0, 400.7, 42.0),
    60: (48.0, 375.6, 54.5),
    75: (52.5, 283.5, 59.0),
}

# Annual mean insolation without atmosphere, W m-2, at 1361 W m-2; ratio to a quarter of the solar
# constant 1.221 at the equator and 0.507 at the pole as in Hartmann, Global Physical Climatology,
# and Berger (1978), FROM MEMORY.
ANNUAL_INSOLATION = {
    0: 415.6,
    10: 409.8,
    20: 392.8,
    30: 365.2,
    40: 328.3,
    45: 307.0,
    50: 284.2,
    60: 236.4,
    70: 196.9,
    80: 178.2,
    90: 172.4,
}
