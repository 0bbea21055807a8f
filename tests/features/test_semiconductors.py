import pytest

from features.errors import UnknownMaterialError
from features.semiconductors import bulk_constants, known_materials, match_material


def test_the_order_of_elements_does_not_matter():
    assert match_material("SeCd") == match_material("CdSe") == "CdSe"
    assert match_material("Br3PbCs") == "CsPbBr3"


def test_constants_come_in_the_order_asked():
    names = ["PbS", "CdSe", "PbS"]
    assert bulk_constants(names)["material"].tolist() == names


def test_every_material_has_all_constants_and_says_which_were_filled():
    table = bulk_constants(known_materials())
    assert (
        not table[["gap_eV", "electron_mass_m0", "hole_mass_m0", "dielectric"]].isna().any().any()
    )
    assert "electron_mass_m0" in table.set_index("material").loc["BP", "filled"]
    assert table.set_index("material").loc["CdSe", "filled"] == ""


def test_a_material_off_the_record_is_named_with_near_ones():
    with pytest.raises(UnknownMaterialError, match=r"'CdSe9'.*did you mean.*CdSe"):
        bulk_constants(["CdSe9"])
