import numpy as np
import pandas as pd
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays

from screening.trade_offs import add_supply, unbeaten

MERITS = arrays(np.float64, st.tuples(st.integers(1, 12), st.just(3)), elements=st.integers(0, 4))


@given(MERITS)
def test_every_beaten_row_is_beaten_by_one_on_the_front(merits):
    front = unbeaten(merits)
    assert front.any()
    for row in merits[~front]:
        as_good = (merits[front] >= row).all(axis=1)
        assert (as_good & (merits[front] > row).any(axis=1)).any()


@given(MERITS, st.permutations(range(3)))
def test_the_front_does_not_depend_on_the_order_of_the_merits(merits, order):
    assert unbeaten(merits).tolist() == unbeaten(merits[:, order]).tolist()


def test_a_row_without_critical_elements_is_kept_beside_a_likelier_one():
    listed = pd.DataFrame({"material": ["InP", "ZnTe", "InP"], "chance_in_window": [0.4, 0.2, 0.3]})
    found = add_supply(listed)
    assert found["is_unbeaten"].tolist()[0]
    assert not found["is_unbeaten"].tolist()[2]
    # indium and phosphorus stand on a list of critical materials; the years are in the words
    assert found["supply"].str.contains("2024").all()
