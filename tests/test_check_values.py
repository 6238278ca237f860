"""The shipped specs: complete pages, and modules that give back the values published for them."""

import tomllib

import pytest
from rootwright import pipeline
from rootwright.calculus.constants import nearest
from rootwright.calculus.lower import Lowering
from rootwright.calculus.program import Graph
from rootwright.spec.reader import read

SPECS = pipeline.shipped()


def _page(name):
    data, _ = pipeline.find(name)
    return data, tomllib.loads(data.decode())


def _double(expression):
    graph = Graph()
    return nearest(graph, Lowering(graph).lower(expression))


def test_at_least_sixteen_closures_are_shipped():
    assert len(SPECS) >= 16


@pytest.mark.parametrize("name", SPECS)
def test_a_shipped_spec_reads_without_a_warning(name):
    _, diagnostics = read(*pipeline.find(name))
    assert not diagnostics


@pytest.mark.parametrize("name", SPECS)
def test_a_shipped_spec_is_named_as_its_file_and_tells_its_source(name):
    _, page = _page(name)
    assert page["name"] == name
    assert page["title"] and page["source"]
    assert all(entry["about"] for entry in page["parameters"].values())
    assert page["unknown"]["about"]
    assert page["published"]


@pytest.mark.parametrize("name", SPECS)
def test_a_shipped_spec_has_checked_dimensions_or_says_that_units_are_labels(name):
    model, _ = read(*pipeline.find(name))
    assert model.dimensions in ("checked", "label")


@pytest.mark.parametrize("name", SPECS)
def test_every_published_value_is_met_inside_the_operating_range(name):
    closed = pipeline.promising(name)
    module = pipeline.load(name, "python")
    for published in closed.model.published:
        given = {parameter: _double(value) for parameter, value in published.given}
        point = module.solve([given[parameter.name] for parameter in closed.model.parameters])
        assert point.status == 0, published.source
        tolerance = dict(published.tolerance)
        for result, value in published.expect:
            found = point.y[closed.model.results.index(result)]
            assert abs(found - _double(value)) <= _double(tolerance[result]), (result, found, published.source)


def test_a_value_from_memory_says_so_first():
    for name in SPECS:
        for published in _page(name)[1]["published"]:
            source = published["source"]
            assert "memory" not in source or source.startswith(("from memory: ", "exact: ")), source
