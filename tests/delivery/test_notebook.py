"""A sounding in a notebook: arrays in, models and unit probabilities out, and a figure."""

import numpy as np
import pytest

import geoves

TEMPLATE = geoves.Template(
    (
        geoves.Unit("till", "Till", geoves.Role.COVER, 25.0, 60.0),
        geoves.Unit("clay", "Blue clay", geoves.Role.CONFINING, 12.0, 26.0),
        geoves.Unit("rock", "Limestone", geoves.Role.BEDROCK, 60.0, 300.0),
    )
)
# Two-layer ground falls to the clay and rises to the rock; MN grows once, with one spacing repeated.
AB2 = np.array([1.5, 2.2, 3.2, 4.6, 6.8, 10, 15, 22, 32, 32, 46, 68, 100, 150, 220, 320])
MN2 = np.array([0.5] * 9 + [8.0] * 7)


def read(ab2, mn2, apparent_resistivity):
    sounding = geoves.make_sounding("A1", ab2, mn2, apparent_resistivity)
    survey = geoves.Survey((sounding,))
    inverted = geoves.invert(survey)
    column = geoves.interpret(survey, inverted, TEMPLATE).columns[0]
    return sounding, inverted[0], column


def test_arrays_become_models_probabilities_and_a_figure():
    from tests.reference.quadrature import response

    true = response(AB2, MN2, np.array([3.0, 30.0]), np.array([40.0, 18.0, 150.0]))
    sounding, inverted, column = read(AB2, MN2, true)
    assert column.unit[-1] == "rock"
    assert column.basal_depth[0] < 33.0 < column.basal_depth[2]
    assert inverted.ensemble.resistivity.shape[1] == inverted.n_layers
    assert np.allclose(column.profile.sum(axis=1), 1.0)
    shown = geoves.draw_sounding(sounding, inverted, column, TEMPLATE)._repr_html_()
    assert shown.startswith("<iframe")
    assert "Blue clay" in shown


def test_a_name_cannot_leave_its_frame():
    sounding = geoves.make_sounding('"><script>x</script>', AB2, MN2, np.full(AB2.size, 40.0) + AB2 / 10)
    inverted = geoves.invert(geoves.Survey((sounding,)))
    column = geoves.interpret(geoves.Survey((sounding,)), inverted, TEMPLATE).columns[0]
    assert "<script>" not in geoves.draw_sounding(sounding, inverted[0], column, TEMPLATE).html


def test_faults_in_arrays_are_told_all_at_once():
    with pytest.raises(geoves.InputError) as caught:
        geoves.make_sounding("A1", [1.0, 2.0, -3.0], [0.5, 3.0, 0.5], [10.0, 10.0, 10.0])
    assert len(caught.value.lines) == 2
    with pytest.raises(geoves.InputError, match="as many of each"):
        geoves.make_sounding("A1", [1.0, 2.0], [0.5], [10.0, 10.0])


def test_wenner_arrays_go_the_same_way():
    """Till on rock at 12 m by Wenner's own image series (textbooks, from memory): one segment, no shifts, its depth."""
    a = np.geomspace(1.0, 120.0, 16)
    order, k = np.arange(1, 4001)[:, None], (300.0 - 30.0) / (300.0 + 30.0)
    depth = 2.0 * 12.0 * order / a
    sums = np.sum(k**order * (1.0 / np.sqrt(1.0 + depth**2) - 1.0 / np.sqrt(4.0 + depth**2)), axis=0)
    apparent = 30.0 * (1.0 + 4.0 * sums)
    sounding = geoves.make_sounding("A2", 1.5 * a, 0.5 * a, apparent, relative_error=0.02, array="wenner")
    assert sounding.array == "wenner"
    assert np.all(sounding.curve.segment == 0)
    template = geoves.Template(
        (
            geoves.Unit("till", "Till", geoves.Role.COVER, 20.0, 45.0),
            geoves.Unit("rock", "Limestone", geoves.Role.BEDROCK, 150.0, 600.0),
        )
    )
    inverted = geoves.invert(geoves.Survey((sounding,)), geoves.InversionOptions(draws=50))
    assert inverted[0].segment_factor.tolist() == [1.0]
    column = geoves.interpret(geoves.Survey((sounding,)), inverted, template).columns[0]
    assert column.bedrock_status == "seen"
    assert column.basal_depth[0] < 12.0 < column.basal_depth[2]
