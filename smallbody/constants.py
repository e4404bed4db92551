"""Constants of nature and of convention, SI, each with its source beside it."""

AU_M = 149_597_870_700.0  # astronomical unit, m (IAU 2012 Resolution B2, exact)
SUN_W = 3.828e26  # nominal solar luminosity, W (IAU 2015 Resolution B3)
GM_SUN = 1.327_124_4e20  # nominal solar mass parameter, m3/s2 (IAU 2015 Resolution B3)
C_M_S = 299_792_458.0  # speed of light, m/s (SI, exact)
SIGMA = 5.670_374_419e-8  # Stefan-Boltzmann constant, W m-2 K-4 (CODATA 2018 and 2022, exact from SI)
DAY_S = 86_400.0  # day, s (SI)
HOUR_S = 3_600.0  # hour, s (SI)
YEAR_S = 365.25 * DAY_S  # Julian year, s (IAU)
MYR_S = 1e6 * YEAR_S  # a million Julian years, s

SOLAR_FLUX_1AU = SUN_W / (4.0 * 3.141_592_653_589_793 * AU_M**2)  # sunlight at 1 au, W/m2 (1361, from the two above)
