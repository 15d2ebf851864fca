"""From a scene to a photograph: light, pinhole, lens, sensor, and the file."""

from __future__ import annotations

import hashlib
from pathlib import Path

import cv2
import numpy as np
from numpy.typing import NDArray

from sample_images.render.camera import Camera, trace_rays
from sample_images.render.grid import Field, Mask
from sample_images.render.light import Lamp, light_on
from sample_images.render.scene import Scene

Picture = NDArray[np.uint8]
Window = tuple[int, int, int, int]

WARM = (1.0, 0.965, 0.90)
COOL = (0.93, 0.98, 1.06)


def illuminate(scene: Scene, lamp: Lamp) -> Field:
    """Return the linear light (rows, columns, 3) that the scene sends upwards."""
    key, around = light_on(scene.heights, scene.grid, lamp)
    east, south, _ = lamp.towards
    reach = 260.0
    falloff = 1 + 0.55 * (scene.grid.x * east + scene.grid.y * south) / reach
    light = (key * falloff.astype(np.float32))[..., None] * np.array(WARM, np.float32)
    light += around[..., None] * np.array(COOL, np.float32)
    return np.asarray(scene.colour * light, np.float32)


def expose(scene: Scene, light: Field, camera: Camera, window: Window) -> tuple[Field, Mask]:
    """Return the linear picture that the lens throws on a window of the sensor, and where a thing is seen."""
    column, row, _ = trace_rays(camera, window, scene.heights, scene.grid)
    picture = cv2.remap(light, column, row, cv2.INTER_CUBIC, borderMode=cv2.BORDER_REPLICATE)
    thing = scene.thing.astype(np.float32)
    seen = cv2.remap(thing, column, row, cv2.INTER_LINEAR, borderMode=cv2.BORDER_CONSTANT)
    return np.clip(np.asarray(picture, np.float32), 0, None), np.asarray(seen > 0.5)


def develop(linear: Field, exposure: float, rng: np.random.Generator, *, noise: float = 1.0) -> Picture:
    """Return the picture as 8-bit blue, green, red: blur of the lens, noise of the sensor, tone curve."""
    blurred = np.asarray(cv2.GaussianBlur(linear, (0, 0), 0.72), np.float32) * np.float32(exposure)
    grain = rng.standard_normal(blurred.shape, np.float32)
    grain = np.asarray(cv2.GaussianBlur(grain, (0, 0), 0.55), np.float32) * 1.6
    blurred += np.float32(noise) * grain * np.sqrt(2.6e-5 * np.clip(blurred, 0, 1) + 1.2e-6)
    clipped = np.clip(blurred, 0, None)
    # a shoulder like film's, so that lips of wedges do not burn out
    toned = clipped * (1 + 0.10 * clipped) / (1 + 0.42 * clipped)
    encoded = np.where(
        toned <= 0.0031308, 12.92 * toned, 1.055 * np.clip(toned, 1e-6, None) ** (1 / 2.4) - 0.055
    )
    eight = np.clip(np.round(255 * encoded + rng.uniform(-0.5, 0.5, encoded.shape)), 0, 255).astype(np.uint8)
    return np.ascontiguousarray(eight[..., ::-1])


def write_jpeg(path: Path, picture: Picture, quality: int) -> str:
    """Write a picture; return the SHA-256 of the file."""
    options = [cv2.IMWRITE_JPEG_QUALITY, quality, cv2.IMWRITE_JPEG_OPTIMIZE, 1]
    done, data = cv2.imencode(".jpg", picture, options)
    if not done:
        message = f"the picture for {path} could not be encoded"
        raise RuntimeError(message)
    path.write_bytes(data.tobytes())
    return hashlib.sha256(data.tobytes()).hexdigest()


def sha256_of(path: Path) -> str:
    """Return the SHA-256 of a file; zeros while there is none."""
    return hashlib.sha256(path.read_bytes()).hexdigest() if path.exists() else "0" * 64
