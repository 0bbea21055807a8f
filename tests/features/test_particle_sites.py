"""Sites by their own generalised coordination, against particles built atom by atom."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from features.errors import PhysicsRangeError
from features.particle import equivalent_diameter_nm, particle_counts
from features.particle_metal import metal_lattice
from features.particle_shapes import available_shapes, explicit_particle
from features.particle_sites import resolved_counts

EXAMPLES = {"fcc": "Pt", "bcc": "Fe", "hcp": "Ru"}
EVERY_SHAPE = [(EXAMPLES[s], shape) for s in EXAMPLES for shape in available_shapes(s)]
SERIES = [pair for pair in EVERY_SHAPE if pair[1] != "wulff"]


@pytest.mark.parametrize(("material", "shape"), SERIES)
@pytest.mark.parametrize("shell", [3, 11])
def test_every_value_occurs_as_often_as_on_a_particle_that_was_built(material, shape, shell):
    metal = metal_lattice(material)
    built = explicit_particle(metal.structure, shape, shell)
    values = built.generalised_coordination[built.class_index >= 0].round(6)
    diameter = equivalent_diameter_nm(built.n_atoms, metal.atomic_volume_nm3)
    found = resolved_counts(material, shape, diameter)
    for value, n in zip(*np.unique(values, return_counts=True), strict=True):
        own = np.isclose(found.generalised_coordination[0], value, atol=1e-6)
        assert found.n_sites[0, own].sum() == pytest.approx(n, abs=1e-4)
    assert found.n_sites.sum() == pytest.approx(len(values), abs=1e-4)


@given(which=st.sampled_from(EVERY_SHAPE), diameter=st.floats(1.0, 20.0))
def test_columns_of_a_class_add_up_to_the_class(which, diameter):
    whole = particle_counts(*which, diameter)
    found = resolved_counts(*which, diameter)
    for position, site in enumerate(whole.classes):
        own = [i for i, other in enumerate(found.classes) if other == site]
        assert found.n_sites[0, own].sum() == pytest.approx(whole.n_sites[0, position], rel=1e-9)
    assert (found.n_sites >= 0.0).all()


@given(which=st.sampled_from(EVERY_SHAPE), diameter=st.floats(3.0, 20.0))
def test_mean_over_the_columns_is_the_mean_of_all_sites(which, diameter):
    whole, found = particle_counts(*which, diameter), resolved_counts(*which, diameter)
    one = np.nansum(whole.n_sites * whole.generalised_coordination) / whole.n_surface[0]
    other = (found.n_sites * found.generalised_coordination).sum() / found.n_surface[0]
    # between closed shells counts and means are interpolated apart
    assert other == pytest.approx(one, abs=0.06)


def test_inner_atoms_of_a_facet_are_those_of_the_extended_surface():
    # Calle-Vallejo et al., Angew. Chem. Int. Ed. 53, 8316 (2014): 7.5 on Pt(111)
    found = resolved_counts("Pt", "octahedron", 20.0)
    largest = int(np.argmax(found.n_sites[0]))
    assert found.generalised_coordination[0, largest] == 7.5


def test_a_shape_of_another_structure_is_refused():
    with pytest.raises(PhysicsRangeError, match="shape of bcc metals"):
        resolved_counts("Pt", "rhombic_dodecahedron", 3.0)
