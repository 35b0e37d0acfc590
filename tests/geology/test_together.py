"""The step on small counties made with the physics: outliers are set aside, decisions count, nothing is hidden."""

import attrs
import numpy as np
import pytest

from geoves.domain.units import Role, Template
from geoves.errors import NotInferredError
from geoves.geology import infer_geology
from geoves.surfaces import SurfaceOptions, build_surfaces_together
from tests.geology.county import (
    GRID,
    QUICK,
    SHALE,
    TEMPLATES,
    Truth,
    make_county,
    make_curve,
)


class Memory:
    """What `infer_geology` may be given to remember by: counts what was computed."""

    def __init__(self):
        self.known, self.computed = {}, 0

    def __call__(self, work, argument):
        key = repr(argument)
        if key not in self.known:
            self.computed += 1
            self.known[key] = work(argument)
        return self.known[key]


def infer(county, **more):
    return infer_geology(*county.arguments, QUICK, **more)


def columns_of(ensemble):
    return {column.place: column for column in ensemble.columns}


def contacts_moved(first, second):
    """How far each place's contact lies deeper in the second, in deviations of the first, by name."""
    moved = {}
    rows = {name: i for i, name in enumerate(columns_of(second))}
    deviation = np.sqrt(np.diag(first.covariance)).reshape(first.mean.shape)[0]
    for i, name in enumerate(columns_of(first)):
        level, other = (
            ensemble.ceiling.elevation(ensemble.points[[row]])[0] - np.exp(ensemble.mean[0, row])
            for ensemble, row in ((first, i), (second, rows[name]))
        )
        moved[name] = (level - other) / (deviation[i] * np.exp(first.mean[0, i]))
    return moved


@pytest.fixture(scope="module")
def county():
    return make_county()


@pytest.fixture(scope="module")
def memory():
    return Memory()


@pytest.fixture(scope="module")
def inferred(county, memory):
    return infer(county, remember=memory)


# The plain case


def test_truth_lies_within_what_is_said(county, inferred):
    inside = [
        column.basal_depth[0] <= county.truth[column.place].basal_depth <= column.basal_depth[2]
        for column in inferred.columns
        if column.kind == "sounding"
    ]
    assert np.mean(inside) >= 0.7
    error = [np.log(c.basal_depth[1] / county.truth[c.place].basal_depth) for c in inferred.columns]
    assert np.sqrt(np.mean(np.square(error))) < 0.16


def test_a_clean_county_is_told_without_alarm(inferred):
    assert inferred.remarks == ()
    assert inferred.diagnostics["converged"]
    assert inferred.diagnostics["set_aside"] == []
    assert all(column.trust > 0.9 for column in inferred.columns)
    assert 0.5 < inferred.diagnostics["median_misfit"] < 1.5


def test_a_log_is_kept_and_its_bound_too(county, inferred):
    columns = columns_of(inferred)
    assert columns["W1"].basal_depth[1] == pytest.approx(county.truth["W1"].basal_depth, abs=1.0)
    assert columns["W1"].gravel_probability > 0.95
    assert columns["W2"].gravel_probability < 0.05
    assert columns["W3"].basal_depth[0] > 44.0


def test_members_are_of_the_posterior(inferred):
    q, n = inferred.mean.shape
    assert inferred.members.shape == (QUICK.members, q, n)
    deviation = np.sqrt(np.diag(inferred.covariance)).reshape(q, n)
    off = (inferred.members.mean(axis=0) - inferred.mean) / deviation
    assert np.abs(off).mean() < 0.4


# A lone outlier


def test_a_lone_outlier_is_set_aside_and_bends_nothing(county):
    name = "S7"
    strange = Truth({"till": 1.0, "upper_gravel": 0.0, "clay": 8.0, "deep_gravel": 0.0}, 9.0)
    curve = make_curve(county.template, strange, np.random.default_rng(5), factor=5.0)
    tops = tuple(
        attrs.evolve(t, depth=9.0, elevation=291.0, standard_error=0.9) if t.place == name else t
        for t in county.interpretation.tops
    )
    with_it = attrs.evolve(
        county.with_curve(name, curve), interpretation=attrs.evolve(county.interpretation, tops=tops)
    )
    kept = [i for i, s in enumerate(county.survey.soundings) if s.name != name]
    without = attrs.evolve(
        county.reordered(kept),
        interpretation=attrs.evolve(county.interpretation, tops=tuple(t for t in tops if t.place != name)),
    )
    bent, free = infer(with_it), infer(without)
    assert bent.diagnostics["set_aside"] == [name]
    assert any("set aside" in remark and name in remark for remark in bent.remarks)
    assert columns_of(bent)[name].trust < 0.5
    moved = contacts_moved(free, bent)
    # Chance of such small clouds alone is 0.1 to 0.3; a log that only bounds the contact has a lopsided doubt.
    assert abs(moved.pop("W3")) < 0.7
    assert max(np.abs(list(moved.values()))) < 1.0 / 3.0


# A template that is wrong


@pytest.mark.parametrize("factor", [0.5, 2.0])
def test_a_template_range_off_by_half_is_told(county, factor):
    units = tuple(
        attrs.evolve(u, resistivity_p05=u.resistivity_p05 * factor, resistivity_p95=u.resistivity_p95 * factor)
        if u.code == "clay"
        else u
        for u in county.template.units
    )
    found = infer(county.with_template(Template(units)))
    told = [remark for remark in found.remarks if "Clay" in remark and "look at the template" in remark]
    assert len(told) == 1
    assert ("above" if factor < 1 else "below") in told[0]


# Picks


def test_a_pick_moves_its_neighbours_as_far_as_the_geology_says(county, inferred, memory):
    name = "S6"
    before = columns_of(inferred)[name]
    depth = float(before.basal_depth[2])  # deeper than thought, not absurdly so
    found = infer(county.with_pick(name, depth, error=1.0), remember=memory)
    names = [column.place for column in found.columns]
    row, n = names.index(name), len(names)
    block = inferred.covariance.reshape(-1, n, inferred.mean.shape[0], n)[0, :, 0]
    deviation = np.sqrt(np.diag(block))
    shift = found.mean[0] - inferred.mean[0]
    assert shift[row] > 0.5 * deviation[row]
    # What the fields' own covariance carries of it: regression of each place's contact on the decided one.
    expected = block[:, row] / block[row, row] * shift[row]
    others = np.arange(n) != row
    assert np.max(np.abs(shift - expected)[others] / deviation[others]) < 0.4
    nearest = np.argsort(np.hypot(*(found.points - found.points[row]).T))[1]
    assert shift[nearest] > 0
    told = columns_of(found)
    assert told[name].moved_by_picks > 0.5
    assert not any("deviations" in remark and "pick" in remark for remark in found.remarks)


def test_a_contradicted_pick_is_flagged_and_stands(county, memory):
    found = infer(county.with_pick("S6", 15.0, error=0.5), remember=memory)
    flagged = [remark for remark in found.remarks if "the pick at S6 by A. Reader" in remark]
    assert len(flagged) == 1
    assert "above where all others expect it" in flagged[0]
    column = columns_of(found)["S6"]
    assert column.trust == 1.0
    assert column.basal_depth[1] == pytest.approx(15.0, abs=3.0)


def test_what_is_remembered_changes_no_bit_and_is_computed_once(county, memory):
    picked = county.with_pick("S6", 70.0)
    found = infer(picked, remember=memory)
    infer(county.with_pick("S2", 35.0), remember=memory)
    assert memory.computed == 1
    plain = infer(picked)
    assert (found.fields, found.remarks, found.ceiling) == (plain.fields, plain.remarks, plain.ceiling)
    for name in ("mean", "covariance", "members", "relief"):
        assert getattr(found, name).tobytes() == getattr(plain, name).tobytes()
    for one, other in zip(found.columns, plain.columns, strict=True):
        assert one.basal_depth.tobytes() == other.basal_depth.tobytes()


# Templates of every kind


@pytest.mark.parametrize("name", sorted(TEMPLATES))
def test_every_template_gives_ordered_surfaces(name):
    county = make_county(name, n_soundings=9, seed=2)
    found = infer(county)
    for column in found.columns:
        assert np.all(np.isfinite(column.basal_depth))
        assert np.all(np.diff(column.basal_depth) >= 0)
        assert np.all(column.rock_depth >= column.basal_depth - 1e-9)
    stack = build_surfaces_together(
        found, county.interpretation, county.survey, county.template, GRID, SurfaceOptions(reach=10_000.0)
    )
    surfaces = stack.surfaces
    rock = surfaces["bedrock_depth"]
    covered = np.isfinite(rock.estimate)
    assert covered.mean() > 0.5
    assert np.all(rock.p05[covered] <= rock.p95[covered])
    assert np.all(rock.p05[covered] >= 0)
    roles = {unit.role for unit in county.template.units}
    assert ("deep_gravel_thickness" in surfaces) == (Role.DEEP_AQUIFER in roles)
    assert ("shallow_aquifer_thickness" in surfaces) == (Role.SHALLOW_AQUIFER in roles)
    assert ("confining_unit_thickness" in surfaces) == (Role.CONFINING in roles)
    parts = ("cover_thickness", "shallow_aquifer_thickness", "confining_unit_thickness", "deep_gravel_thickness")
    total = sum(surfaces[part].estimate[covered] for part in parts if part in surfaces)
    np.testing.assert_allclose(total, rock.estimate[covered], atol=1e-6)
    for surface in surfaces.values():
        assert np.isfinite(surface.estimate[covered]).any()
    # The valley is seen: deeper on its floor than on the plain.
    assert rock.estimate[3:5].mean() > rock.estimate[[0, 7]].mean() + 8.0


# Order, blocks


def test_nothing_hangs_on_the_order_of_soundings(county, inferred):
    order = np.random.default_rng(8).permutation(len(county.survey.soundings))
    found = infer(county.reordered(order))
    first, second = columns_of(inferred), columns_of(found)
    for name, column in first.items():
        np.testing.assert_allclose(second[name].basal_depth, column.basal_depth, rtol=1e-4)
        assert second[name].gravel_probability == pytest.approx(column.gravel_probability, abs=1e-3)


def test_nothing_hangs_on_the_blocks(county, inferred):
    blocks = []

    def map_backward(work, arguments):
        parts = list(arguments)
        blocks.append(len(parts))
        return [work(part) for part in parts[::-1]][::-1]

    found = infer_geology(*county.arguments, attrs.evolve(QUICK, block=5), map=map_backward)
    assert max(blocks) >= 3
    np.testing.assert_array_equal(found.mean, inferred.mean)


# Too little


def few(county, count, contacts=None):
    said = county.interpretation
    tops = said.tops if contacts is None else said.tops[:contacts]
    return attrs.evolve(county, inverted=county.inverted[:count], interpretation=attrs.evolve(said, tops=tops))


@pytest.mark.parametrize(("count", "contacts", "words"), [(4, None, "4 soundings"), (12, 2, "2 known basal contacts")])
def test_too_little_is_refused_with_the_reason(county, count, contacts, words):
    with pytest.raises(NotInferredError, match=words):
        infer(few(county, count, contacts))


def test_nothing_above_the_contact_is_refused(county):
    with pytest.raises(NotInferredError, match="no unit above"):
        infer(county.with_template(Template((SHALE,))))
