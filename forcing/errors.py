"""Typed errors. Each names the place, the value and a remedy, in one line."""

from __future__ import annotations


class DaylayerError(ValueError):
    """Base of every error that bad data or an unanswerable question raises.

    Parameters
    ----------
    problem : str
        What is wrong, with the offending value in it.
    place : str
        File, and line, level or key where there is one.
    remedy : str
        What the user can do about it.
    """

    def __init__(self, problem: str, *, place: str = "", remedy: str = "") -> None:
        self.problem = problem
        self.place = place
        self.remedy = remedy
        text = f"{place}: {problem}" if place else problem
        super().__init__(f"{text}; {remedy}" if remedy else text)


class ProfileError(DaylayerError):
    """A sounding cannot be read or used."""


class ScenarioError(DaylayerError):
    """A scenario file or a first-use flag is wrong."""


class WeatherError(DaylayerError):
    """A weather, flux or observation table is wrong or has a gap."""


class CoverError(DaylayerError):
    """A land cover is unknown or its properties are not usable."""


class ModelError(DaylayerError):
    """The inputs are readable but the model cannot answer from them."""
