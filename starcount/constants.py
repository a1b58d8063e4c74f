"""Adopted numbers, each with its source. One definition per number."""

D_MAX_KPC = 100.0
"""Counts end here, about as far as the halo's density has been measured. A power law that went on to 1000 kpc would
add 0.6 % at 20 < G < 21 at the pole (measured in the tests); real halos fall faster (Deason et al. 2011, MNRAS 416)."""

DEG2_SR = (3.141592653589793 / 180.0) ** 2
"""One square degree in steradians."""

REFERENCE_WINDOW_MV_MAG = (4.5, 8.5)
"""The absolute magnitudes, in Johnson V, over which every population of discs and halo is normalised."""

STAR_CLASSES = ("dwarf", "subgiant", "red giant", "clump", "horizontal branch", "white dwarf")
"""The classes of stars that luminosity functions keep apart."""

EVOLVED_CLASSES = STAR_CLASSES[1:5]
"""The four classes that the one word "evolved" stands for, in a layer's ``classes`` and in tables."""

CLASS_WORDS = (*STAR_CLASSES, "evolved")
"""What a class of stars may be called in a file."""
