"""Bundled invented sites, profiles and weather; installed as ``slab.scenarios``."""
