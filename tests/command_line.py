"""A small good problem and recipe as files, and the command line run on them; tests spoil one thing in a file."""

from pathlib import Path
from typing import NamedTuple

from typer.testing import CliRunner

from codesign.cli import app

PROBLEM = """
title = "Blue cap among green caps"
required_cnr = 3

[scene]
target = "cap-blue"
background = "cap-green"
guards = ["cap-white"]

[[scene.ambient]]
illuminant = "D65"
illuminance_lx = 200

[candidates]
leds = ["blue-470-a", "red-625-a"]
filters = "none"
cameras = ["mono-5mp"]
gains_db = [0]

[optics]
f_numbers = [4, 8]
magnification = 0.1
lens_transmittance = 0.9

[lighting]
mode = "strobe"
emitters_per_channel = 2
distance_mm = 200
drive_step_ma = 5
driver_max_ma = 800

[motion]
speed_mm_per_s = 100
max_blur_px = 1

[timing]
frame_rate_hz = 50

[temperature]
air_c = 30
sensor_c = 45

[limits]
junction_max_c = 100
rig_heat_w = 2

[solver]
alternatives = 0
"""

RECIPE = """
camera = "mono-5mp"
channel = "mono"
gain_db = 0
filter = "none"
f_number = 4
exposure_us = 300

[drive_ma]
blue-470-a = 400
"""


class Outcome(NamedTuple):
    """What a run of the command line left behind."""

    code: int
    out: str
    err: str


def cnr(*arguments: str | Path) -> Outcome:
    """Run the command line in this process."""
    result = CliRunner().invoke(app, [str(argument) for argument in arguments])
    if result.exception is not None and not isinstance(result.exception, SystemExit):
        raise result.exception
    return Outcome(result.exit_code, result.stdout, result.stderr)


def spoiled(text: str, old: str, new: str) -> str:
    """Replace one piece of a file; the piece must be there once."""
    assert text.count(old) == 1, f"{old!r} is {text.count(old)} times in the file"
    return text.replace(old, new)
