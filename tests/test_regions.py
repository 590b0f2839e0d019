import pytest
from hypothesis import given
from hypothesis import strategies as st

from rcbench.errors import InputError
from rcbench.regions import read_regions, read_setting, write_regions, write_setting


def test_a_label_joins_runs_and_parts_regions():
    assert write_regions(range(4), range(4, 8), (8, 10)) == "0-3|4-7|8,10"


@given(st.lists(st.sets(st.integers(0, 60), min_size=1), min_size=1, max_size=4))
def test_every_label_reads_back(regions):
    assert read_regions(write_regions(*regions)) == tuple(tuple(sorted(region)) for region in regions)


@pytest.mark.parametrize("label", ["", "a", "3-1", "1,1", "0-3|", "1-2-3"])
def test_a_broken_label_is_refused_by_what_was_found(label):
    with pytest.raises(InputError, match="region: found"):
        read_regions(label)


def test_a_setting_reads_back():
    label = write_setting({"butterfly": 5, "probe": 2, "W": "X", "V": "Z"})
    assert label == "butterfly=5;probe=2;W=X;V=Z"
    assert read_setting(label) == {"butterfly": "5", "probe": "2", "W": "X", "V": "Z"}
