"""Adopted numbers, each with its source. One definition per number."""

R0_KPC = 8.178
"""Distance of the Sun from the Galactic centre: GRAVITY Collaboration 2019, A&A 625, L10."""

Z0_KPC = 0.0208
"""Height of the Sun above the plane: Bennett & Bovy 2019, MNRAS 482, 1417. Tracers differ from 0.005 to 0.027."""

D_MAX_KPC = 100.0
"""Counts end here, about as far as the halo's density has been measured. A power law that went on to 1000 kpc would
add 0.6 % at 20 < G < 21 at the pole (measured in the tests); real halos fall faster (Deason et al. 2011, MNRAS 416)."""

DEG2_SR = (3.141592653589793 / 180.0) ** 2
"""One square degree in steradians."""

REFERENCE_WINDOW_MV_MAG = (4.5, 8.5)
"""The absolute magnitudes, in Johnson V, over which every population of discs and halo is normalised."""
