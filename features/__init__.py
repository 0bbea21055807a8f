"""Composition and size to a feature matrix: cited tables, elemental descriptors, physics."""
