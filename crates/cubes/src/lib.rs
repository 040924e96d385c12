//! Spectra and cubes from files, tiles of them, and the store of maps.
