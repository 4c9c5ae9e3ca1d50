"""A second way to the same answers: a die painted on a raster of points, conformal films by rolling over it.

Written without the package's geometry: outlines by periodic coordinates, depths by scipy's distance transform,
conformal tops by trying every offset. Good to about one raster step along edges.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.ndimage import distance_transform_edt


@dataclass(frozen=True)
class Raster:
    """A region on (ny, nx) points. x, y (nm); top: the surface; layers: (layer index, floor, top) from the
    bottom up; feature: for each layer index the number in the layer of the feature there, -1 for none; depth:
    for each layer index the distance to the nearest point outside features alike."""

    x: np.ndarray
    y: np.ndarray
    layers: list
    feature: dict
    depth: dict

    @property
    def top(self):
        return self.layers[-1][2]


def periodic(distance, period):
    return (distance + period / 2) % period - period / 2


def covers(shape, x, y, cell):
    if hasattr(shape, "diameter"):
        dx, dy = periodic(x - shape.x, cell.x), periodic(y - shape.y, cell.y)
        return dx**2 + dy**2 <= (shape.diameter / 2) ** 2
    if hasattr(shape, "along"):
        at, period = (x, cell.x) if shape.along == "y" else (y, cell.y)
        return np.abs(periodic(at - shape.centre, period)) <= shape.width / 2
    inside = np.ones(np.broadcast(x, y).shape, dtype=bool)
    for at, (low, high), period in ((x, shape.x, cell.x), (y, shape.y, cell.y)):
        inside &= np.abs(periodic(at - (low + high) / 2, period)) <= (high - low) / 2
    return inside


def depth_inside(mask, step):
    """Distance to the nearest point outside, periodic, less half a step."""
    ny, nx = mask.shape
    if mask.all():
        return np.full(mask.shape, np.inf)
    tiled = np.tile(mask, (3, 3))
    return distance_transform_edt(tiled)[ny : 2 * ny, nx : 2 * nx] * step - step / 2


def rolled(z, thickness, sidewall, step):
    """The highest of half-ellipses put on every point of a periodic surface."""
    reach = thickness * sidewall
    most = int(reach / step)
    best = np.full_like(z, -np.inf)
    for i in range(-most, most + 1):
        for j in range(-most, most + 1):
            away2 = (i * i + j * j) * step * step / reach**2
            if away2 <= 1.0:
                lifted = np.roll(z, (i, j), axis=(0, 1)) + thickness * np.sqrt(1.0 - away2)
                np.maximum(best, lifted, out=best)
    return best


def paint(stack, region, step, shift=0.5):
    """Build a region up on a square raster of the given step (nm), which must divide the cell.

    With shift=0 points lie on all straight edges that are multiples of the step, where distances come out exact.
    """
    x = (np.arange(round(stack.cell.x / step)) + shift) * step
    y = ((np.arange(round(stack.cell.y / step)) + shift) * step)[:, None]
    shape = (y.size, x.size)
    z = np.zeros(shape)
    layers, feature, depth = [], {}, {}
    last = len(stack.layers) - 1
    for index in reversed(range(len(stack.layers))):
        layer = stack.layers[index]
        t = layer.thickness.value
        if layer.name in region.absent.layers:
            continue
        which, deep = features_of(layer, region, x, y, stack.cell, shape, step)
        feature[index], depth[index] = which, deep
        if index == last:
            layers.append((index, z - t, z))
            continue
        if layer.coverage == "conformal":
            new = rolled(z, t, layer.sidewall, step)
        elif layer.material == "none":
            new = np.where(which >= 0, z + t, z)
        else:
            new = np.full(shape, z.max() + t)
        layers.append((index, z, new))
        z = new
    return Raster(x, y, layers, feature, depth)


def features_of(layer, region, x, y, cell, shape, step):
    which, deep = np.full(shape, -1), np.zeros(shape)
    if layer.name in region.solid:
        names = [f.name for f in layer.features]
        return np.full(shape, names.index(region.solid[layer.name])), np.full(shape, np.inf)
    if layer.name in region.absent.features_of:
        return which, deep
    masks = [np.broadcast_to(covers(f.shape, x, y, cell), shape) for f in layer.features]
    for k, mask in enumerate(masks):
        here = mask & (which < 0)
        which[here] = k
    for k, one in enumerate(layer.features):
        like = [
            m
            for m, f in zip(masks, layer.features, strict=True)
            if (f.material, f.liner, f.cap, f.base) == (one.material, one.liner, one.cap, one.base)
        ]
        inside = depth_inside(np.any(like, axis=0), step)
        deep[which == k] = inside[which == k]
    return which, deep


def sequence(raster, stack, row, col):
    """Segments (layer name, feature name or None, part, thickness) at one point, from the top down."""
    found = []
    for index, floor, top in reversed(raster.layers):
        layer, high = stack.layers[index], top[row, col] - floor[row, col]
        k = raster.feature[index][row, col]
        if high <= 1e-9:
            continue
        if k < 0:
            found.append((layer.name, None, "fill", high))
            continue
        feature = layer.features[k]
        films = [film.thickness.value for film in feature.liner]
        ring = int(np.searchsorted(np.cumsum(films), raster.depth[index][row, col], side="right"))
        bottoms = [(layer.name, feature.name, "liner", t) for t in films[:ring][::-1]]
        if feature.base:
            bottoms.append((layer.name, feature.name, "base", feature.base.thickness.value))
        left = high - sum(b[3] for b in bottoms)
        if ring < len(films):
            found += [(layer.name, feature.name, "liner", left), *bottoms]
            continue
        if feature.cap:
            found.append((layer.name, feature.name, "cap", feature.cap.thickness.value))
            left -= feature.cap.thickness.value
        found += [(layer.name, feature.name, "core", left), *bottoms]
    return found
