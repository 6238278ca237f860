"""A spec to begin with."""

from importlib import resources


def starter(name):
    """Text of a commented spec that passes `check`, for a closure of that name."""
    template = resources.files("rootwright.spec").joinpath("starter.toml").read_text(encoding="utf-8")
    return template.replace("@name@", name)
