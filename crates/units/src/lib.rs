//! Constants, units, spectral axes, air and vacuum wavelengths, Doppler shifts.
