# SPDX-License-Identifier: GPL-3.0-or-later
"""Problems of the bench, as matrix files (see bench.h): straight rays through cells in two and three dimensions, and
networks of distances (2-D) and baselines (3-D). Everything is invented and comes from fixed seeds."""
import os

import numpy as np
import scipy.sparse as sp


def write_matrix(path, A, b, sigma, coordinate=None):
    A = sp.csc_matrix(A)
    A.sum_duplicates()
    A.sort_indices()
    with open(path + '.part', 'wb') as file:
        np.array([A.shape[0], A.shape[1], A.nnz, 0], np.int64).tofile(file)
        A.indptr.astype(np.int64).tofile(file)
        A.indices.astype(np.int32).tofile(file)
        if A.nnz % 2:
            np.zeros(1, np.int32).tofile(file)
        A.data.astype(np.float64).tofile(file)
        b.astype(np.float64).tofile(file)
        np.broadcast_to(np.asarray(sigma, np.float64), b.shape).astype(np.float64).tofile(file)
        full = np.full((3, A.shape[1]), np.nan)
        if coordinate is not None:
            full[:coordinate.shape[0]] = coordinate
        full.tofile(file)
    os.rename(path + '.part', path)


def read_matrix(path):
    with open(path, 'rb') as file:
        m, n, nonzeros, _ = np.fromfile(file, np.int64, 4)
        start = np.fromfile(file, np.int64, n + 1)
        index = np.fromfile(file, np.int32, nonzeros)
        if nonzeros % 2:
            file.seek(4, 1)
        value = np.fromfile(file, np.float64, nonzeros)
        b = np.fromfile(file, np.float64, m)
        sigma = np.fromfile(file, np.float64, m)
    return sp.csc_matrix((value, index, start), shape=(m, n)), b, sigma


def trace_rays(ends, cells):
    """Lengths of straight rays in unit cells. ends: rays x 2 x d; cells: d numbers. Where a ray crosses the planes between
    cells its parameter t in 0..1 is known for every plane; sorted, their differences are the parts in one cell each."""
    rays, d = ends.shape[0], len(cells)
    rows, columns, lengths = [], [], []
    step = max(1, 4_000_000 // (sum(cells) + d))
    for first in range(0, rays, step):
        part = ends[first:first + step]
        a, way = part[:, 0], part[:, 1] - part[:, 0]
        cross = [np.zeros((len(part), 1)), np.ones((len(part), 1))]
        for axis in range(d):
            with np.errstate(divide='ignore', invalid='ignore'):
                t = (np.arange(1, cells[axis])[None, :] - a[:, axis, None]) / way[:, axis, None]
            cross.append(np.clip(np.nan_to_num(t, nan=0.0, posinf=1.0, neginf=0.0), 0.0, 1.0))
        t = np.sort(np.concatenate(cross, axis=1), axis=1)
        middle, share = (t[:, 1:] + t[:, :-1]) / 2, np.diff(t, axis=1)
        keep = share > 1e-12
        cell = np.zeros(middle.shape, np.int64)
        for axis in range(d):
            place = np.floor(a[:, axis, None] + middle * way[:, axis, None]).astype(np.int64)
            cell = cell * cells[axis] + np.clip(place, 0, cells[axis] - 1)
        row = np.broadcast_to(np.arange(first, first + len(part))[:, None], middle.shape)
        rows.append(row[keep].astype(np.int32))
        columns.append(cell[keep].astype(np.int32))
        lengths.append((share * np.linalg.norm(way, axis=1)[:, None])[keep])
    A = sp.coo_matrix((np.concatenate(lengths), (np.concatenate(rows), np.concatenate(columns))),
                      shape=(rays, int(np.prod(cells))))
    return A.tocsr()


def times(A, cells, rng):
    """Travel times through a smooth body and a layer, with one part in a hundred of noise."""
    axes = np.meshgrid(*[(np.arange(c) + 0.5) / c for c in cells], indexing='ij')
    square = sum((x - 0.45) ** 2 for x in axes)
    slowness = 0.5 + 0.05 * np.exp(-square / 0.02) - 0.04 * (np.abs(axes[-1] - 0.75) < 0.06)
    b = A @ slowness.ravel()
    sigma = 0.01 * b.mean()
    coordinate = np.array([(x * c).ravel() for x, c in zip(axes, cells)])
    return b + sigma * rng.normal(size=len(b)), sigma, coordinate


def rays(path, cells, count, shuffled=False, every_way=False):
    """Rays between random points of the two faces that end the last axis, along which the cells are numbered first; every_way:
    alternately along each axis, so that gradients in all directions are determined."""
    rng = np.random.default_rng(20260401)
    d = len(cells)
    size = np.array(cells, float)
    ends = rng.uniform(0.001, 0.999, (count, 2, d)) * size
    along = np.arange(count) % d if every_way else np.full(count, d - 1)
    ends[np.arange(count), 0, along] = 0.0
    ends[np.arange(count), 1, along] = size[along]
    A = trace_rays(ends, cells)
    b, sigma, coordinate = times(A, cells, rng)
    if shuffled:
        rows, columns = rng.permutation(A.shape[0]), rng.permutation(A.shape[1])
        A, b, coordinate = A[rows][:, columns], b[rows], coordinate[:, columns]
    write_matrix(path, A, b, sigma, coordinate)


def cross_hole(path, side):
    """Side sources in one hole, side receivers in the other, side x side cells."""
    rng = np.random.default_rng(5)
    z = np.linspace(0.37, side - 0.41, side)
    ends = np.empty((side * side, 2, 2))
    ends[:, 0, 0], ends[:, 1, 0] = 0.0, side
    ends[:, 0, 1], ends[:, 1, 1] = np.repeat(z, side), np.tile(z + 0.013, side)
    A = trace_rays(ends[:, :, ::-1].copy(), (side, side))
    b, sigma, coordinate = times(A, (side, side), rng)
    write_matrix(path, A, b, sigma, coordinate)


def network(path, dimension, unknowns, shuffled=False):
    """About three readings an unknown between near points of a jittered lattice; readings to the first two points, which are
    held, lose those columns. 2-D: distances; 3-D: baselines of three correlated components, whitened."""
    rng = np.random.default_rng(7)
    side = max(4, int(round(np.sqrt(unknowns / dimension))))
    number = np.arange(side * side).reshape(side, side)
    steps = [(0, 1), (1, 0), (1, 1), (1, -1), (1, 2), (2, 1)] if dimension == 2 else [(0, 1), (1, 0), (1, 1)]
    pairs = []
    for down, right in steps:
        a = number[:side - down, max(0, -right):side - max(0, right)]
        c = number[down:, max(0, right):side + min(0, right)]
        pairs.append(np.stack([a.ravel(), c.ravel()]))
    a, c = np.concatenate(pairs, axis=1)
    order = rng.permutation(side * side) if shuffled else np.arange(side * side)
    place = np.stack(np.divmod(np.arange(side * side), side), axis=1) * 100.0 + rng.uniform(-20, 20, (side * side, 2))
    m = len(a)
    if dimension == 2:
        way = place[c] - place[a]
        way /= np.linalg.norm(way, axis=1)[:, None]
        rows = np.repeat(np.arange(m), 4)
        columns = np.stack([2 * order[a], 2 * order[a] + 1, 2 * order[c], 2 * order[c] + 1], axis=1).ravel()
        values = np.concatenate([-way, way], axis=1).ravel()
        A = sp.csr_matrix((values, (rows, columns)), shape=(m, 2 * side * side))
    else:
        whiten = np.linalg.inv(np.linalg.cholesky(np.array([[1.0, 0.3, -0.2], [0.3, 1.2, 0.4], [-0.2, 0.4, 2.0]])))
        i, j = np.tril_indices(3)
        rows = (3 * np.arange(m)[:, None] + i).ravel()
        way = sp.csr_matrix((np.tile(whiten[i, j], m), (rows, (3 * np.arange(m)[:, None] + j).ravel())))
        rows, axis = np.repeat(np.arange(3 * m), 2), np.tile(np.repeat(np.arange(3), 2), m)
        columns = 3 * np.stack([order[a], order[c]], axis=1).repeat(3, axis=0).ravel() + axis
        A = way @ sp.csr_matrix((np.tile([-1.0, 1.0], 3 * m), (rows, columns)), shape=(3 * m, 3 * side * side))
    keep = np.ones(A.shape[1], bool)
    for point in order[:2]:
        keep[dimension * point:dimension * (point + 1)] = False
    A = A[:, keep]
    A = A[np.diff(A.indptr) > 0]
    x = rng.normal(scale=0.01, size=A.shape[1])
    write_matrix(path, A, A @ x + rng.normal(size=A.shape[0]) * 1e-3, 1.0)
