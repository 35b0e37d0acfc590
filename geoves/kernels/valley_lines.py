"""Lines along the floor of a valley in a surface: arrays in, arrays out, in units of cells."""

import numpy as np
from numpy.typing import NDArray
from scipy import ndimage, sparse
from scipy.sparse import csgraph

FloatArray = NDArray[np.float64]

_EVERY_NEIGHBOUR = np.ones((3, 3), bool)
_SCIPY_NO_PREDECESSOR = -9999
_MOST_LINES = 60  # in one connected valley: far more than a map can show
_SAMPLE = 20_000


def fit_regional_plane(surface: FloatArray, quantile: float) -> FloatArray:
    """The plane that passes above `quantile` of the surface's cells, on every cell (rows, columns).

    Linear quantile regression [1] by iteratively reweighted least squares on an even sample of the finite cells.
    [1] R. Koenker and G. Bassett, 1978, Regression quantiles, Econometrica 46, 33-50.
    """
    rows, columns = np.nonzero(np.isfinite(surface))
    every = max(1, rows.size // _SAMPLE)
    shape = np.array(surface.shape, float)
    design = np.column_stack([np.ones(rows[::every].size), rows[::every] / shape[0], columns[::every] / shape[1]])
    values = surface[rows[::every], columns[::every]]
    smallest = 1e-6 * (np.ptp(values) + 1.0)
    weight = np.ones(values.size)
    for _ in range(60):
        root = np.sqrt(weight)
        plane = np.linalg.lstsq(design * root[:, None], values * root, rcond=None)[0]
        residual = values - design @ plane
        weight = np.where(residual > 0.0, quantile, 1.0 - quantile) / np.maximum(np.abs(residual), smallest)
    row, column = np.indices(surface.shape)
    return plane[0] + plane[1] * row / shape[0] + plane[2] * column / shape[1]


def find_incision(depth: FloatArray, threshold: float) -> NDArray[np.bool_]:
    """Cells of valleys: connected where `depth` is at least half the threshold and somewhere the whole of it."""
    loose = np.nan_to_num(depth, nan=-np.inf) >= 0.5 * threshold
    label, _ = ndimage.label(loose, structure=_EVERY_NEIGHBOUR)
    kept = np.unique(label[np.nan_to_num(depth, nan=-np.inf) >= threshold])
    return np.isin(label, kept[kept > 0])


def trace_valleys(
    depth: FloatArray, valley: NDArray[np.bool_], least_length: float
) -> list[tuple[int, NDArray[np.intp], NDArray[np.intp]]]:
    """Order, rows and columns of each line along a valley's floor: a main line first, then its tributaries.

    The tree of each connected valley is grown as TEASAR [1] grows one: the first path joins the two places that lie
    farthest apart inside the valley, each next starts at the place farthest from what is drawn and joins it, and every
    path takes the cheapest way, which here is the deepest. The main line is the way through the tree with the largest
    long section; what is left are tributaries, which run to their junction. Only the floor may hold an end: cells
    within a tenth of the deepest within half of the valley's half width. A line counts from `least_length` cells and
    from twice that width.
    [1] M. Sato, I. Bitter, M. A. Bender, A. E. Kaufman and M. Nakajima, 2000, TEASAR: tree-structure extraction
        algorithm for accurate and robust skeletons, Proc. Pacific Graphics 2000, 281-289.
    """
    if not valley.any():
        return []
    inner = ndimage.distance_transform_edt(valley)
    rows, columns = np.nonzero(valley)
    distance, cost = _link_neighbours(depth, valley)
    _, component = csgraph.connected_components(distance, directed=False)
    found = []
    for which in range(component.max() + 1):
        nodes = np.flatnonzero(component == which)
        if np.hypot(np.ptp(rows[nodes]), np.ptp(columns[nodes])) < least_length:
            continue
        half_width = max(1.0, float(np.quantile(inner[rows[nodes], columns[nodes]], 0.9)))
        size = 2 * int(np.ceil(0.5 * half_width)) + 1
        deepest = ndimage.maximum_filter(np.where(valley, depth, -np.inf), size=size)
        floor = depth[rows[nodes], columns[nodes]] >= 0.9 * deepest[rows[nodes], columns[nodes]]
        start = int(np.argmax(depth[rows[nodes], columns[nodes]]))
        reach = max(least_length, 2.0 * half_width)
        links = distance[nodes][:, nodes]
        tree = _grow_tree(links, cost[nodes][:, nodes], np.flatnonzero(floor), start, reach)
        chosen = _divide_tree(tree, links, depth[rows[nodes], columns[nodes]], reach)
        found += [(order, rows[nodes[path]], columns[nodes[path]]) for order, path in chosen]
    return found


def _link_neighbours(depth: FloatArray, valley: NDArray[np.bool_]) -> tuple[sparse.csr_array, sparse.csr_array]:
    """Graphs over the valley's cells and their eight neighbours: distance in cells, and cost, cheap where deep."""
    number = np.full(valley.shape, -1)
    number[valley] = np.arange(np.count_nonzero(valley))
    price = (depth[valley].max() / depth[valley]) ** 3
    starts, ends, lengths = [], [], []
    height, width = valley.shape
    for down, right in ((0, 1), (1, 0), (1, 1), (1, -1)):
        here = number[: height - down, max(0, -right) : width - max(0, right)]
        there = number[down:, max(0, right) : width - max(0, -right)]
        both = (here >= 0) & (there >= 0)
        starts.append(here[both])
        ends.append(there[both])
        lengths.append(np.full(np.count_nonzero(both), np.hypot(down, right)))
    start, end, length = np.concatenate(starts), np.concatenate(ends), np.concatenate(lengths)
    shape = (price.size, price.size)
    distance = sparse.coo_array((length, (start, end)), shape=shape).tocsr()
    cost = sparse.coo_array((length * 0.5 * (price[start] + price[end]), (start, end)), shape=shape).tocsr()
    return distance, cost


def _grow_tree(
    distance: sparse.csr_array, cost: sparse.csr_array, floor: NDArray[np.intp], start: int, least_reach: float
) -> list[NDArray[np.intp]]:
    """Paths that together are the tree of one connected valley; each but the first ends on an earlier one."""
    first = floor[np.argmax(csgraph.dijkstra(distance, directed=False, indices=start)[floor])]
    from_first = csgraph.dijkstra(distance, directed=False, indices=first)
    last = floor[np.argmax(from_first[floor])]
    if from_first[last] < least_reach:
        return []
    _, before = csgraph.dijkstra(cost, directed=False, indices=first, return_predecessors=True)
    paths = [_walk_back(before, last)]
    while len(paths) < _MOST_LINES:
        drawn = np.unique(np.concatenate(paths))
        away = csgraph.dijkstra(distance, directed=False, indices=drawn, min_only=True)
        head = floor[np.argmax(away[floor])]
        if away[head] < least_reach:
            break
        price, before = csgraph.dijkstra(cost, directed=False, indices=head, return_predecessors=True)
        path = _walk_back(before, drawn[np.argmin(price[drawn])])[::-1]
        paths.append(path[: 1 + int(np.argmax(np.isin(path, drawn)))])
    return paths


def _divide_tree(
    paths: list[NDArray[np.intp]], distance: sparse.csr_array, depth: FloatArray, least_reach: float
) -> list[tuple[int, NDArray[np.intp]]]:
    """Order and nodes of each line of a tree: the main line is the way with the largest sum of depth times length."""
    if not paths:
        return []
    start = np.concatenate([path[:-1] for path in paths])
    end = np.concatenate([path[1:] for path in paths])
    length = np.maximum(distance[start, end], distance[end, start])
    tree = sparse.coo_array((length, (start, end)), shape=distance.shape).tocsr()
    section = sparse.coo_array((length * 0.5 * (depth[start] + depth[end]), (start, end)), shape=tree.shape).tocsr()
    nodes = np.unique(np.concatenate(paths))
    first = nodes[np.argmax(csgraph.dijkstra(section, directed=False, indices=nodes[0])[nodes])]
    reached, before = csgraph.dijkstra(section, directed=False, indices=first, return_predecessors=True)
    lines = [(1, _walk_back(before, nodes[np.argmax(reached[nodes])]))]
    order = np.zeros(depth.size, int)
    order[lines[0][1]] = 1
    while True:
        away, before, _ = csgraph.dijkstra(
            tree, directed=False, indices=np.flatnonzero(order), min_only=True, return_predecessors=True
        )
        head = nodes[np.argmax(away[nodes])]
        if away[head] < least_reach:
            return lines
        path = _walk_back(before, head)
        lines.append((int(order[path[-1]]) + 1, path))
        order[path[:-1]] = order[path[-1]] + 1


def _walk_back(before: NDArray[np.int32], end: int) -> NDArray[np.intp]:
    """Nodes from `end` back to the source of a shortest-path tree."""
    path = [int(end)]
    while before[path[-1]] != _SCIPY_NO_PREDECESSOR:
        path.append(int(before[path[-1]]))
    return np.array(path, dtype=np.intp)


def smooth_path(positions: NDArray[np.integer], half_window: int) -> FloatArray:
    """Moving means along a path, narrowing towards its ends, which stay: the staircase of cells made a line.

    >>> smooth_path(np.array([0, 1, 1, 2, 2]), 1).round(2).tolist()
    [0.0, 0.67, 1.33, 1.67, 2.0]
    """
    index = np.arange(positions.size)
    half = np.minimum(half_window, np.minimum(index, index[::-1]))
    total = np.concatenate([[0.0], np.cumsum(positions, dtype=float)])
    return (total[index + half + 1] - total[index - half]) / (2 * half + 1)
