"""The colours of all pictures, as seen by people."""

import subprocess
import sys

import numpy as np
import pytest

from fieldgen.products import look
from tests.products.maps.invented import hex_bytes


def lightness_and_hue(colours):
    """CIELAB (colour, 3) of sRGB (colour, 3), by the definition of IEC 61966-2-1 and CIE 15."""
    linear = linear_light(colours)
    matrix = [[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]]
    ratio = linear @ np.transpose(matrix) / [0.9505, 1.0, 1.089]
    cube = np.where(ratio > (6 / 29) ** 3, np.cbrt(ratio), ratio / (3 * (6 / 29) ** 2) + 4 / 29)
    x, y, z = cube.T
    return np.transpose([116 * y - 16, 500 * (x - y), 200 * (y - z)])


def linear_light(colours):
    return np.where(colours <= 0.04045, colours / 12.92, ((colours + 0.055) / 1.055) ** 2.4)


RAMP = np.array([hex_bytes(colour) for colour in look.PWV_COLOURS]) / 255
# Machado, Oliveira and Fernandes (2009), severity 1.
SIGHT = {
    "full": np.eye(3),
    "protanopia": [
        [0.152286, 1.052583, -0.204868],
        [0.114503, 0.786281, 0.099216],
        [-0.003882, -0.048116, 1.051998],
    ],
    "deuteranopia": [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ],
}


def seen_colours(colours, sight):
    linear = np.clip(linear_light(np.asarray(colours)) @ np.transpose(SIGHT[sight]), 0, 1)
    coded = 1.055 * linear ** (1 / 2.4) - 0.055
    return lightness_and_hue(np.where(linear <= 0.0031308, 12.92 * linear, coded))


def test_colours_darken_in_even_steps():
    """Second derivation: CIELAB; steps alike within 5 %, the printed digits of the colours."""
    ramp = lightness_and_hue(RAMP)
    steps = np.linalg.norm(np.diff(ramp, axis=0), axis=1)
    assert steps == pytest.approx(np.full(12, steps.mean()), rel=0.05)
    assert (np.diff(ramp[:, 0]) < -4).all()


@pytest.mark.parametrize("sight", SIGHT)
def test_colours_stay_apart_in_all_kinds_of_sight(sight):
    """Published matrices; a distance of 2.3 in CIELAB is just noticeable."""
    ramp = seen_colours(RAMP, sight)
    assert (np.linalg.norm(np.diff(ramp, axis=0), axis=1) > 2 * 2.3).all()
    grey = seen_colours([np.array(hex_bytes(look.MISSING_COLOUR)) / 255], sight)
    assert (np.linalg.norm(ramp - grey, axis=1) > 5 * 2.3).all()


@pytest.mark.parametrize("side", [-1, 1])
def test_relief_moves_a_colour_by_less_than_a_step(side):
    shaded = np.clip(RAMP * (1 + side * look.RELIEF_STRENGTH), 0, 1)
    ramp = lightness_and_hue(RAMP)
    moved = np.linalg.norm(lightness_and_hue(shaded) - ramp, axis=1)
    assert moved.max() < np.linalg.norm(np.diff(ramp, axis=0), axis=1).min()


def test_look_loads_no_drawing_library():
    code = "import sys, fieldgen.products.look; print('matplotlib' in sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "False"
