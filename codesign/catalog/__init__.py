"""Catalogue of LEDs, filters, cameras and surfaces, read from plain TOML and CSV."""

from codesign.catalog.camera import Camera, GainSetting
from codesign.catalog.common import Part
from codesign.catalog.filter import Filter
from codesign.catalog.led import Led, PulseBracket
from codesign.catalog.loader import Catalog, demo_catalog_path, load_catalog, parse_parts
from codesign.catalog.select import select
from codesign.catalog.surface import Surface

__all__ = [
    "Camera",
    "Catalog",
    "Filter",
    "GainSetting",
    "Led",
    "Part",
    "PulseBracket",
    "Surface",
    "demo_catalog_path",
    "load_catalog",
    "parse_parts",
    "select",
]
