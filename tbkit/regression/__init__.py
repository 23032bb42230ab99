"""The built-in regression: plain profiles that fit any decoder; copy one to start your own."""

from __future__ import annotations

from importlib import resources
from pathlib import Path

from tbkit.profile import Profile
from tbkit.profile_file import read_profile

#: Profiles of the built-in regression are left out when they would take more clock periods than this.
MOST_PERIODS = 1_000_000


def builtin_profiles() -> list[Profile]:
    """Every profile of the built-in regression, in the order of their file names."""
    with resources.as_file(resources.files(__name__)) as folder:
        return [read_profile(path) for path in sorted(Path(folder).glob("*.yaml"))]
