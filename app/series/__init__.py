"""Tensors and cells against temperature, wavelength, pressure or composition."""
