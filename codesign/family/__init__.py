"""Families: many variants of one problem, solved as a batch that survives."""

from codesign.family.files import demo_families, family_path
from codesign.family.load import Family, load_family
from codesign.family.variants import Variant

__all__ = ["Family", "Variant", "demo_families", "family_path", "load_family"]
