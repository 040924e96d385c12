#!/usr/bin/env python3
"""Writes a neon lamp's spectrum, as the PyPI package ramanchada2 carries it; nothing without that package.

    neon_table.py OUT.csv     columns wavelength_nm, intensity (counts)
"""

import importlib.util
import pathlib
import sys

if len(sys.argv) != 2:
    sys.exit(__doc__)
out = pathlib.Path(sys.argv[1])
out.unlink(missing_ok=True)
package = importlib.util.find_spec("ramanchada2")
if package is None:
    sys.exit(0)
folder = pathlib.Path(package.submodule_search_locations[0])
for path in sorted(folder.rglob("Ne_532nm_x50_25ms.txt")):
    header, rows = None, []
    for line in path.read_text(errors="replace").splitlines():
        cells = [cell.strip() for cell in line.split(";")]
        if cells[0] == "Pixel":
            header = cells
            counts = next(k for k, cell in enumerate(header) if cell.startswith("Dark Subtracted"))
        elif header:
            try:
                wavelength = float(cells[header.index("Wavelength")].replace(",", "."))
                rows.append((wavelength, float(cells[counts].replace(",", "."))))
            except ValueError:
                pass  # Blank cells where the detector reaches beyond the grating.
    text = "# medium: air\n# intensity_unit: counts\nwavelength_nm,intensity\n"
    out.write_text(text + "".join(f"{w},{c}\n" for w, c in rows))
    break
