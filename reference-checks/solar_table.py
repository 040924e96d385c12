#!/usr/bin/env python3
"""Writes the extraterrestrial spectrum of ASTM G173-03, as the PyPI package pvlib carries it.

    solar_table.py OUT.csv     columns wavelength_nm, intensity (W m-2 nm-1)
"""

import sys

from pvlib.spectrum import get_reference_spectra

if len(sys.argv) != 2:
    sys.exit(__doc__)
table = get_reference_spectra(standard="ASTM G173-03")["extraterrestrial"]
with open(sys.argv[1], "w") as out:
    print("# medium: air\n# intensity_unit: W m-2 nm-1\nwavelength_nm,intensity", file=out)
    for wavelength_nm, irradiance in table.items():
        print(f"{wavelength_nm},{irradiance}", file=out)
