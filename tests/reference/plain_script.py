"""What a competent person would script in an afternoon: the line that geoves is held against.

Least squares for each sounding alone with 2 to 5 layers, the number chosen by BIC; the deepest interface is the rock
(a sounding whose resistivity falls there is left out), a layer on it in the gravel's range is gravel; ordinary kriging
of elevations with a fitted spherical variogram. Segments are tied at their shared spacings; the finite MN is ignored,
and every depth is taken at its word. Wenner soundings are left out. What differs from county to county is `Local`.
"""

from itertools import pairwise
from pathlib import Path

import attrs
import numpy as np
import pandas as pd
import rasterio
from pykrige.ok import OrdinaryKriging
from scipy.optimize import least_squares

FOOT = 0.3048  # m
# Guptasarma 1982, Geophysical Prospecting 30, 501-514 (pages from memory): the 19-point Schlumberger filter.
ABSCISSAE = -0.980685 + 0.20869 * np.arange(19)
# fmt: off
WEIGHTS = np.array(
    [
        0.00097112, -0.00102152, 0.00906965, 0.01404316, 0.09012, 0.30171582, 0.99627084, 1.3690832, -2.99681171,
        1.65463068, -0.59399277, 0.22329813, -0.10119309, 0.05186135, -0.02748647, 0.01384932, -0.00599074,
        0.00190463, -0.0003216,
    ]
)
# fmt: on


@attrs.frozen
class Local:
    """What the script's author knows of the county: the demo's, if nothing is said.

    gravel : the range of the gravel on rock, ohm m    highest : the largest resistivity of a layer, ohm m
    rock_word : in the drillers' words for rock    well_unit : m, the unit of the wells' tables
    """

    gravel: tuple[float, float] = (38.0, 55.0)
    highest: float = 300.0
    rock_word: str = "lime"
    well_unit: float = FOOT


HERE = Local()


def apparent_resistivity(ab2, thickness, resistivity):
    """Ideal Schlumberger curves (b, n) ohm m; thickness (b, k-1) m, resistivity (b, k) ohm m."""
    wavenumber = 10.0**ABSCISSAE / ab2[:, None]
    transform = np.broadcast_to(resistivity[:, -1, None, None], (len(resistivity), *wavenumber.shape))
    for layer in reversed(range(thickness.shape[1])):
        h, rho = thickness[:, layer, None, None], resistivity[:, layer, None, None]
        damped = np.tanh(wavenumber * h)
        transform = (transform + rho * damped) / (1.0 + transform * damped / rho)
    return resistivity[:, :1] + (transform - resistivity[:, :1, None]) @ WEIGHTS


def log_response(parameters, ab2):
    """Ln of the curves (b, n) of ln(thickness), ln(resistivity) side by side in (b, 2k-1)."""
    layers = parameters.shape[1] // 2
    return np.log(apparent_resistivity(ab2, np.exp(parameters[:, :layers]), np.exp(parameters[:, layers:])))


def fit_layers(ab2, log_read, layers, highest):
    """The best of two starts: cost and ln parameters. Depths start log-spaced from AB/2, resistivities on the curve."""
    best_cost, best = np.inf, None
    step = 1e-4

    def residual(parameters):
        return log_response(parameters[None], ab2)[0] - log_read

    def jacobian(parameters):
        shifted = np.vstack([parameters[None], parameters + step * np.eye(len(parameters))])
        curves = log_response(shifted, ab2)
        return (curves[1:] - curves[0]).T / step

    for share in (0.25, 0.5):
        depth = np.geomspace(1.5, share * ab2.max(), layers - 1)
        resistivity = np.interp(np.geomspace(2.0, ab2.max(), layers), ab2, log_read)
        start = np.concatenate([np.log(np.diff(depth, prepend=0.0)), resistivity])
        low = np.concatenate([np.full(layers - 1, np.log(0.3)), np.full(layers, np.log(8.0))])
        high = np.concatenate([np.full(layers - 1, np.log(0.4 * ab2.max())), np.full(layers, np.log(highest))])
        start = np.clip(start, low + 0.01, high - 0.01)
        found = least_squares(residual, start, jacobian, (low, high), loss="soft_l1", f_scale=0.05, max_nfev=80)
        if found.cost < best_cost:
            best_cost, best = found.cost, found.x
    return best_cost, best


def interpret(ab2, read, local=HERE):
    """Depth to the deepest interface (m) and the thickness of a gravel on it (m), from one sounding.

    NaN twice where resistivity falls across that interface: a spread that ends in clay shows no rock.
    """
    log_read = np.log(read)
    choices = []
    for layers in range(2, 6):
        cost, parameters = fit_layers(ab2, log_read, layers, local.highest)
        criterion = len(ab2) * np.log(2.0 * cost / len(ab2)) + len(parameters) * np.log(len(ab2))
        choices.append((criterion, parameters))
    parameters = min(choices, key=lambda choice: choice[0])[1]
    count = len(parameters) // 2
    thickness, resistivity = np.exp(parameters[:count]), np.exp(parameters[count:])
    if resistivity[-1] < resistivity[-2]:
        return np.nan, np.nan
    is_gravel = count > 1 and local.gravel[0] <= resistivity[-2] <= local.gravel[1]
    return thickness.sum(), thickness[-1] if is_gravel else 0.0


def read_curves(folder):
    """AB/2 and apparent resistivity of each sounding, readings out of use dropped, repeats averaged."""
    readings = pd.read_csv(folder / "readings.csv").dropna(subset="ab2")
    factor = np.pi * (readings["ab2"] ** 2 - readings["mn2"] ** 2) / (2.0 * readings["mn2"])
    metered = factor * readings["voltage_mv"] / readings["current_ma"]
    readings["apparent_resistivity"] = readings["apparent_resistivity"].fillna(metered)
    used = tie_segments(readings[readings["use"] == 1])
    means = used.groupby(["sounding", "ab2"], sort=True)["apparent_resistivity"].mean().reset_index()
    return {
        name: (rows["ab2"].to_numpy(), rows["apparent_resistivity"].to_numpy())
        for name, rows in means.groupby("sounding")
    }


def tie_segments(readings):
    """The readings with each later MN segment brought to the level of the one before it, by their shared spacings."""
    tied = []
    for _, rows in readings.groupby("sounding"):
        segments = [segment for _, segment in rows.groupby("mn2")]
        for before, after in pairwise(list(segments)):
            shared = before.set_index("ab2").join(after.set_index("ab2"), how="inner", rsuffix="_after")
            ratio = shared["apparent_resistivity"] / shared["apparent_resistivity_after"]
            after["apparent_resistivity"] *= ratio.mean() if len(ratio) else 1.0
        tied.extend(segments)
    return pd.concat(tied)


def rock_in_wells(folder, local):
    """x, y and rock elevation (m) of the wells whose log names the rock."""
    wells = pd.read_csv(folder / "wells.csv").set_index("well")
    logs = pd.read_csv(folder / "well_logs.csv")
    top = logs[logs["description"].str.contains(local.rock_word, case=False)].groupby("well")["top"].min()
    wells = wells.loc[top.index]
    return wells["x"].to_numpy(), wells["y"].to_numpy(), (wells["ground_elevation"] - top).to_numpy() * local.well_unit


def fit_variogram(x, y, values):
    """Nugget, partial sill and range (m) from pairs up to 10 km apart in 10 lags, weighted by N / h^2."""
    first, second = np.triu_indices(len(x), 1)
    apart = np.hypot(x[first] - x[second], y[first] - y[second])
    half_square = 0.5 * (values[first] - values[second]) ** 2
    lag = (apart // 1_000.0).astype(int)
    pairs = np.array([np.sum(lag == k) for k in range(10)])
    distance = np.array([apart[lag == k].mean() for k in range(10)])
    observed = np.array([half_square[lag == k].mean() for k in range(10)])

    def misfit(parameters):
        ratio = np.minimum(distance / parameters[2], 1.0)
        return (parameters[0] + parameters[1] * (1.5 * ratio - 0.5 * ratio**3) - observed) * np.sqrt(pairs) / distance

    level = values.var()
    scale = (level, level, 4_000.0)
    start, low, high = (0.3 * level, 0.7 * level, 4_000.0), (0.0, 1e-6, 1_000.0), (3 * level, 5 * level, 30_000.0)
    return least_squares(misfit, start, bounds=(low, high), x_scale=scale).x


def krige(x, y, values, grid_x, grid_y):
    """Estimate and standard error (rows, columns) by ordinary kriging with a spherical variogram."""
    if np.ptp(values) == 0.0:  # nothing to fit a variogram to
        return np.full((len(grid_y), len(grid_x)), values[0]), np.zeros((len(grid_y), len(grid_x)))
    nugget, sill, reach = fit_variogram(x, y, values)
    parameters = {"nugget": nugget, "psill": sill, "range": reach}
    kriged = OrdinaryKriging(x, y, values, variogram_model="spherical", variogram_parameters=parameters)
    estimate, variance = kriged.execute("grid", grid_x, grid_y)
    return np.asarray(estimate), np.sqrt(np.maximum(np.asarray(variance), 0.0))


def run_plain_script(folder, grid_x, grid_y, local=HERE):
    """Rock elevation, its standard error and gravel thickness (rows, columns) m on a grid of easting and northing."""
    folder = Path(folder)
    curves = read_curves(folder)
    soundings = pd.read_csv(folder / "soundings.csv").set_index("sounding")
    soundings = soundings[soundings.index.isin(curves)]
    with rasterio.open(folder / "ground.tif") as raster:
        ground = np.array([value[0] for value in raster.sample(soundings[["x", "y"]].to_numpy())], dtype=float)
    elevation = soundings["ground_elevation"].fillna(pd.Series(ground, index=soundings.index))
    found = {name: interpret(*curve, local) for name, curve in curves.items()}
    depth, gravel = np.array([found[name] for name in soundings.index]).T
    shown = np.isfinite(depth)
    depth, gravel, soundings, elevation = depth[shown], gravel[shown], soundings[shown], elevation[shown]
    x, y = soundings["x"].to_numpy(), soundings["y"].to_numpy()
    well_x, well_y, well_rock = rock_in_wells(folder, local)
    rock = np.concatenate([elevation.to_numpy() - depth, well_rock])
    bedrock, error = krige(np.append(x, well_x), np.append(y, well_y), rock, grid_x, grid_y)
    thickness, _ = krige(x, y, gravel, grid_x, grid_y)
    return bedrock, error, np.maximum(thickness, 0.0)
