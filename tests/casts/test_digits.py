import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from ocean_sound.casts.digits import plain_numbers

PLAIN = st.from_regex(r" {0,2}-?(?=[0-9.]*[0-9])[0-9]{0,8}(\.[0-9]{0,7})? {0,2}", fullmatch=True)


@given(st.lists(st.lists(PLAIN, min_size=3, max_size=3), min_size=1, max_size=12), st.sampled_from(",;\t"))
def test_bit_for_bit_what_float_gives(rows, delimiter):
    """Python's float is correctly rounded; the sign of zero counts too."""
    found = plain_numbers("\n".join(delimiter.join(row) for row in rows), delimiter, 3)
    expected = np.array([[float(cell) for cell in row] for row in rows])
    assert found.tobytes() == expected.tobytes()


@given(st.floats(-1e7, 1e7, allow_nan=False).map(lambda value: f"{value:.7f}"))
def test_seven_decimals_of_anything(text):
    assert plain_numbers(text, ",", 1).item().hex() == float(text).hex()


@pytest.mark.parametrize(
    "text",
    [
        *(
            "",
            "1,2\n3",
            "1,2,3\n4",
            "1\n2,3",
            "1,\n2,3",
            ",\n,",
            "1,2\n\n3,4",
            "1,1e5",
            "1,nan",
            "1,1.2.3",
            "1,1-2",
            "1,--2",
        ),
        *("1,-", "1,.", "1,1 2", "1,- 2", "1,+2", "1,1234567890123456", "1,１", "1,a", '1,"2"', "1,2\t", "1,2\r"),
    ],
)
def test_what_is_not_plain_is_left_alone(text):
    assert plain_numbers(text, ",", 2) is None


@given(st.text("0123456789.-, \ne", max_size=40))
def test_never_a_number_that_float_would_not_give(text):
    found = plain_numbers(text, ",", 2)
    if found is not None:
        expected = [[float(cell) for cell in line.split(",")] for line in text.split("\n")]
        assert found.tolist() == expected
