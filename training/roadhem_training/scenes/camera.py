"""From light to a delivered picture: blur, noise, tones, compression, and what mosaics do."""

from __future__ import annotations

import cv2
import numba
import numpy as np
from numpy.typing import NDArray

from roadhem_training.scenes.flight import Flight
from roadhem_training.scenes.heights import scatter

GAMMA_STEPS, BRIGHTEST = 4096, 1.5
"""Entries of the tone table and the light of its last one."""

BRIGHT_PERCENT = 93
"""Percentile of the light that exposure is set by."""

APART_PX = 23
"""The bands' own noise is one draw taken so many rows apart."""

HAZE = (0.42, 0.47, 0.54)
"""Light of the air between camera and ground."""

SHOULDER = 32
"""Counts below white in which highlights are compressed."""
COARSEST_M = 0.25
"""Coarsest pixel that a picture is taken with before it is resampled."""


def take_picture(
    light: NDArray[np.float32], pixel: float, flight: Flight, rng: np.random.Generator
) -> tuple[NDArray[np.uint8], NDArray[np.bool_]]:
    """Turn relative light into a delivered picture.

    Parameters
    ----------
    light : (rows, cols, 3) float32, 1 is white in full sun; changed in place.
    pixel : metres.

    Returns
    -------
    image (rows, cols, 3) uint8, valid (rows, cols) bool.
    """
    if flight.has("intensity"):
        light = returns(light, pixel, rng)
    light = cv2.GaussianBlur(light, (0, 0), rng.uniform(0.35, 0.75))
    if flight.has("coarser"):
        light = resample(light, pixel, rng)
    image = tone_curve(light, flight, rng)
    if flight.has("fringe"):
        image = fringe(image, rng)
    if flight.has("halo"):
        image = sharpen(image, rng)
    image += noise_for(image, rng)
    picture = np.clip(image, 0, 255).astype(np.uint8)
    picture = deliver(picture, flight, rng)
    return wedge(picture, flight, rng)


def resample(light: NDArray[np.float32], pixel: float, rng: np.random.Generator) -> NDArray[np.float32]:
    """Average to a coarser pixel and interpolate back, as a coarser flight would come."""
    factor = float(np.exp(rng.uniform(0, np.log(max(COARSEST_M / pixel, 1.05)))))
    rows, cols = light.shape[:2]
    size = (max(round(cols / factor), 8), max(round(rows / factor), 8))
    small = cv2.resize(light, size, interpolation=cv2.INTER_AREA)
    back = cv2.INTER_CUBIC if rng.random() < 0.6 else cv2.INTER_LINEAR
    return cv2.resize(small, (cols, rows), interpolation=back)


def returns(light: NDArray[np.float32], pixel: float, rng: np.random.Generator) -> NDArray[np.float32]:
    """Strength of LiDAR returns: near infrared, where plants are bright, speckled, in cells of its own."""
    plants = np.clip(light[..., 1] - 0.5 * (light[..., 0] + light[..., 2]), 0, None)
    strength = light.mean(axis=2) + np.float32(rng.uniform(2, 6)) * plants
    cells = max(round(light.shape[0] * pixel / rng.uniform(0.2, 0.5)), 8)
    coarse = cv2.resize(strength, (cells, cells), interpolation=cv2.INTER_AREA)
    coarse = scatter(coarse, rng) * np.exp(rng.normal(0, rng.uniform(0.08, 0.3), coarse.shape)).astype(np.float32)
    way = cv2.INTER_LINEAR if rng.random() < 0.5 else cv2.INTER_NEAREST
    return cv2.merge([cv2.resize(coarse, light.shape[1::-1], interpolation=way)] * 3)


def tone_curve(light: NDArray[np.float32], flight: Flight, rng: np.random.Generator) -> NDArray[np.float32]:
    """Exposure, white balance, haze, gamma, contrast and saturation: light to 0..255 float32, in place."""
    bright = float(np.percentile(light[::8, ::8, 1], BRIGHT_PERCENT))
    exposure = float(np.clip(rng.uniform(0.4, 0.85) / max(bright, 1e-3), 0.7, 3.5))
    warm, green = rng.normal(0, 0.035), rng.normal(0, 0.015)
    balance = np.exp([warm, green, -warm])
    haze = rng.uniform(0.03, 0.22) if flight.has("haze") else rng.uniform(0, 0.03)
    gamma = 2.2 * np.exp(rng.normal(0, 0.08))
    contrast = rng.uniform(0.75, 1.15) * (1.35 if flight.has("stretched") else 1.0)
    lift = rng.normal(0.02, 0.03)
    ramp = np.linspace(0, BRIGHTEST, GAMMA_STEPS)[:, None] * exposure * balance
    value = ramp * (1 - haze) + haze * np.array(HAZE)
    table = 255 * ((np.clip(value, 0, None) ** (1 / gamma) - 0.5) * contrast + 0.5 + lift)
    knee = 255 - SHOULDER
    table = np.where(table > knee, knee + SHOULDER * np.tanh((table - knee) / SHOULDER), table).astype(np.float32)
    _look_up(light, table, saturation_matrix(rng.uniform(0.45, 1.05)))
    return light


def saturation_matrix(amount: float) -> NDArray[np.float32]:
    """Colour matrix (3, 3) that keeps brightness and multiplies saturation by `amount`."""
    grey = np.tile(np.array([0.30, 0.59, 0.11]), (3, 1))
    return (grey + amount * (np.eye(3) - grey)).astype(np.float32)


def fringe(image: NDArray[np.float32], rng: np.random.Generator) -> NDArray[np.float32]:
    """Shift red and blue against each other by a part of a pixel, as lenses and scanners do."""
    shift = rng.normal(0, 0.22, 2).clip(-0.5, 0.5)
    planes = list(cv2.split(image))
    for k, sign in ((0, 1), (2, -1)):
        matrix = np.array([[1, 0, sign * shift[0]], [0, 1, sign * shift[1]]])
        size = (image.shape[1], image.shape[0])
        planes[k] = cv2.warpAffine(planes[k], matrix, size, flags=cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
    return cv2.merge(planes)


def sharpen(image: NDArray[np.float32], rng: np.random.Generator) -> NDArray[np.float32]:
    """Unsharp mask: a halo along edges."""
    soft = cv2.GaussianBlur(image, (0, 0), rng.uniform(0.7, 1.6))
    amount = rng.uniform(0.2, 1.1)
    return cv2.addWeighted(image, 1 + amount, soft, -amount, 0)


def noise_for(image: NDArray[np.float32], rng: np.random.Generator) -> NDArray[np.float32]:
    """Sensor noise: grows with the signal, mostly the same in all bands, sometimes smeared by resampling."""
    level = float(np.exp(rng.uniform(np.log(0.4), np.log(4.0))))
    rows, cols = image.shape[:2]
    drawn = rng.standard_normal((rows + 3 * APART_PX, cols), np.float32)
    colour = np.float32(rng.uniform(0.1, 0.5))
    bands = [drawn[:rows] + colour * drawn[k * APART_PX : k * APART_PX + rows] for k in (1, 2, 3)]
    noise = cv2.merge(bands)
    if rng.random() < 0.5:
        noise = cv2.GaussianBlur(noise, (0, 0), 0.7) * np.float32(2.0)
    return noise * np.float32(level)


def deliver(picture: NDArray[np.uint8], flight: Flight, rng: np.random.Generator) -> NDArray[np.uint8]:
    """Apply what mosaicking, conversion and compression do."""
    if flight.has("seam"):
        picture = seam(picture, rng)
    if flight.has("smear"):
        picture = smear(picture, rng)
    if flight.has("grey") or flight.has("intensity"):
        picture = np.repeat(cv2.cvtColor(picture, cv2.COLOR_RGB2GRAY)[..., None], 3, axis=2)
    if flight.has("jpeg"):
        quality = int(rng.integers(45, 96))
        done, data = cv2.imencode(".jpg", picture[..., ::-1], [cv2.IMWRITE_JPEG_QUALITY, quality])
        if done:
            picture = np.ascontiguousarray(cv2.imdecode(data, cv2.IMREAD_COLOR)[..., ::-1])
    return picture


def side_of_line(shape: tuple[int, int], rng: np.random.Generator, at: float) -> NDArray[np.bool_]:
    """Pixels on one side of a random line; `at` 0 runs through the middle, 1 through the farthest corner."""
    angle = rng.uniform(0, 2 * np.pi)
    rows, cols = shape
    x = np.arange(cols, dtype=np.float32) - cols / 2
    y = np.arange(rows, dtype=np.float32)[:, None] - rows / 2
    return x * np.cos(angle) + y * np.sin(angle) > at * 0.5 * np.hypot(rows, cols)


def seam(picture: NDArray[np.uint8], rng: np.random.Generator) -> NDArray[np.uint8]:
    """Join two pictures along a line: a colour step and a shift of at most a pixel or so."""
    shift = rng.normal(0, 0.5, 2).clip(-1.2, 1.2)
    gain = np.exp(rng.normal(0, 0.06)) * np.exp(rng.normal(0, 0.02, 3))
    matrix = np.array([[1, 0, shift[0]], [0, 1, shift[1]]])
    size = (picture.shape[1], picture.shape[0])
    other = cv2.warpAffine(picture, matrix, size, flags=cv2.INTER_LINEAR, borderMode=cv2.BORDER_REPLICATE)
    other = np.clip(other * gain.astype(np.float32), 0, 255).astype(np.uint8)
    part = side_of_line(picture.shape[:2], rng, rng.uniform(-0.4, 0.6))
    return np.where(part[..., None], other, picture)


def smear(picture: NDArray[np.uint8], rng: np.random.Generator) -> NDArray[np.uint8]:
    """Drag a small piece of the picture along one direction, as failed terrain models do."""
    rows, cols = picture.shape[:2]
    size = int(min(rows, cols) * rng.uniform(0.05, 0.15))
    r, c = int(rng.integers(rows - size)), int(rng.integers(cols - size))
    length = int(rng.integers(5, 17))
    kernel = np.zeros((length, length), np.float32)
    end = (int(rng.integers(length)), length - 1)
    cv2.line(kernel, (length - 1 - end[0], 0), end, 1.0)
    piece = picture[r : r + size, c : c + size]
    picture = picture.copy()
    picture[r : r + size, c : c + size] = cv2.filter2D(piece, -1, kernel / kernel.sum())
    return picture


def wedge(
    picture: NDArray[np.uint8], flight: Flight, rng: np.random.Generator
) -> tuple[NDArray[np.uint8], NDArray[np.bool_]]:
    """Cut away what the flight did not cover."""
    valid = np.ones(picture.shape[:2], bool)
    if flight.has("no_data"):
        valid = ~side_of_line(valid.shape, rng, rng.uniform(0.45, 0.9))
        picture = np.where(valid[..., None], picture, np.uint8(0))
    return picture, valid


@numba.njit(cache=True)
def _look_up(light, table, matrix):  # type: ignore[no-untyped-def]
    last = len(table) - 1
    scale = np.float32(last / BRIGHTEST)
    for r in range(light.shape[0]):
        for c in range(light.shape[1]):
            red = table[min(max(int(light[r, c, 0] * scale), 0), last), 0]
            green = table[min(max(int(light[r, c, 1] * scale), 0), last), 1]
            blue = table[min(max(int(light[r, c, 2] * scale), 0), last), 2]
            for k in range(3):
                light[r, c, k] = matrix[k, 0] * red + matrix[k, 1] * green + matrix[k, 2] * blue
