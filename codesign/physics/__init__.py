"""Equations of light, optics, filters, sensors and detection.

One function per equation, on plain numbers and arrays, in SI units and electrons; wavelengths in nm.
Nothing here knows a catalogue, a problem or an optimiser.
"""
