"""The measured column made ready for use: stated tests, named and counted repairs, re-basing, interpolation."""

from __future__ import annotations

from forcing.sounding import Flag, Profile, Repair, Sounding

__all__ = ["Flag", "Profile", "Repair", "Sounding"]
