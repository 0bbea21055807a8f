"""Metals, shapes and sizes of a specification: what is taken, what is refused and why."""

import numpy as np
import pytest

from features.errors import NothingQualifiesError, SpecificationError
from screening.adsorption_pure import PureSurfaceModel, pure_rows, surface_adsorbates
from screening.catalyst_candidates import (
    USUAL_SHAPES,
    check_adsorbates,
    choose_particles,
    particle_grid,
)
from screening.specification import Candidates
from screening.surface_target import SurfaceTarget

OXYGEN = SurfaceTarget(adsorbate="O", window_eV=[0.0, 1.0]).question
AMMONIA = SurfaceTarget(reaction="ammonia synthesis").question


def test_every_metal_takes_the_usual_shape_of_its_structure():
    chosen, refused = choose_particles(Candidates(materials=["Pt", "Ru", "W", "AgAu"]), OXYGEN)
    assert chosen["material"].tolist() == ["Pt", "Ru", "W", "AgAu"]
    assert chosen["structure"].tolist() == ["fcc", "hcp", "bcc", "fcc"]
    assert chosen["shape"].tolist() == [USUAL_SHAPES[s] for s in chosen["structure"]]
    assert refused.empty


def test_without_names_every_metal_with_a_lattice_is_taken():
    chosen, _ = choose_particles(Candidates(), OXYGEN)
    assert {"Pt", "Ru", "W", "Au"} <= set(chosen["material"])
    assert "Ga" not in set(chosen["material"])


def test_one_alloy_written_twice_is_one_candidate():
    chosen, _ = choose_particles(Candidates(materials=["Pt3Ni", "NiPt3", "Pt6Ni2"]), OXYGEN)
    assert chosen["material"].tolist() == ["Pt3Ni"]


def test_a_shape_goes_to_the_metals_that_form_it_and_the_others_are_listed():
    wanted = Candidates(shapes=["cube"], diameter_nm=[2.0, 3.0])
    chosen, refused = choose_particles(wanted, OXYGEN)
    assert set(chosen["structure"]) == {"fcc", "bcc"}
    assert refused.set_index("material")["reason"]["Ru"].startswith("'cube' is a shape of fcc")


def test_excluded_elements_take_their_alloys_with_them():
    wanted = Candidates(materials=["Pt", "PtNi"], exclude_elements=["Ni"])
    chosen, refused = choose_particles(wanted, OXYGEN)
    assert chosen["material"].tolist() == ["Pt"]
    assert refused["material"].tolist() == ["PtNi"]
    assert refused["reason"].tolist() == ["contains excluded Ni"]


def test_metals_without_counted_steps_are_listed_for_a_reaction_on_steps():
    _, refused = choose_particles(Candidates(), AMMONIA)
    assert "Fe" in set(refused["material"])


@pytest.mark.parametrize(
    ("candidates", "question", "message"),
    [
        ({"materials": ["Pt"], "shapes": ["rhombic_dodecahedron"]}, OXYGEN, "shape of bcc metals"),
        ({"materials": ["Pt"], "shapes": ["teapot"]}, OXYGEN, "unknown shape"),
        ({"shapes": ["wulff", "teapot"]}, OXYGEN, "unknown shape 'teapot'"),
        (
            {"materials": ["Pt"], "shapes": ["cube", "hexagonal_prism"]},
            OXYGEN,
            "'hexagonal_prism' is a shape of hcp metals, none of which is left",
        ),
        ({"materials": ["Xe"]}, OXYGEN, "candidates.materials: no surface data"),
        ({"materials": ["PtNiCo"]}, OXYGEN, "too many elements"),
        ({"materials": ["Ga"]}, OXYGEN, "no particle can be built"),
        ({"materials": ["Pt"], "diameter_nm": [0.6, 3.0]}, OXYGEN, "0.720 nm .13 atoms. or more"),
        ({"materials": ["Fe"]}, AMMONIA, "an fcc or hcp metal"),
        ({"materials": ["Pt"], "shapes": ["icosahedron"]}, AMMONIA, "no step sites"),
    ],
)
def test_what_cannot_be_made_is_explained(candidates, question, message):
    with pytest.raises(SpecificationError, match=message):
        choose_particles(Candidates(**candidates), question)


def test_nothing_left_says_why():
    wanted = Candidates(materials=["Pt"], exclude_elements=["Pt"])
    with pytest.raises(NothingQualifiesError, match="Pt: contains excluded Pt"):
        choose_particles(wanted, OXYGEN)


def test_an_unknown_adsorbate_is_told_with_the_known_ones():
    question = SurfaceTarget(adsorbate="Xx", window_eV=[0, 1]).question
    with pytest.raises(SpecificationError, match=r"target\.adsorbate: expected one of C, .*'Xx'"):
        check_adsorbates(question)


def test_adsorbates_known_before_training_are_those_of_the_model():
    assert surface_adsorbates() == PureSurfaceModel().fit(pure_rows(), max_iter=0).adsorbates_


def test_the_grid_holds_every_size_of_every_particle():
    wanted = Candidates(materials=["Pt", "Ru"], diameter_nm=[2.0, 3.0], step_nm=0.25)
    grid = particle_grid(choose_particles(wanted, OXYGEN)[0], wanted)
    assert len(grid) == 10
    np.testing.assert_allclose(grid["diameter_nm"][:5], [2.0, 2.25, 2.5, 2.75, 3.0])
