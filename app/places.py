"""Where the files that ship with the program lie, in a checkout and in a wheel alike."""

from pathlib import Path

_TOP = Path(__file__).resolve().parent.parent

ASSETS = _TOP / "assets"
SAMPLE_SWEEPS = _TOP / "sample_sweeps"
