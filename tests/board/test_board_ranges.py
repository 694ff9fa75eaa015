import pytest
from hypothesis import given
from hypothesis import strategies as st

from boardsim.board.ranges import HIGHEST, read_range, write_range
from boardsim.errors import QuantityError


@pytest.mark.parametrize(
    ("text", "numbers"),
    [
        ("0", (0,)),
        ("0-3", (0, 1, 2, 3)),
        ("3-0", (3, 2, 1, 0)),
        ("0,2,8-10", (0, 2, 8, 9, 10)),
        (" 1 - 3 , 7 ", (1, 2, 3, 7)),
        ("5-5", (5,)),
        ("007", (7,)),
        (str(HIGHEST), (HIGHEST,)),
    ],
)
def test_a_range_names_its_numbers_in_the_order_written(text: str, numbers: tuple[int, ...]) -> None:
    assert read_range(text) == numbers


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "'' is not a range of numbers; write it such as '0-23' or '0,2,8-15'"),
        ("a", "'a' is not a range of numbers"),
        ("1,", "'1,' is not a range of numbers"),
        ("-1", "'-1' is not a range of numbers"),
        ("1..3", "is not a range of numbers"),
        ("1-2-3", "is not a range of numbers"),
        ("1.5", "is not a range of numbers"),
        ("\u0663", "is not a range of numbers"),
        ("1\n.control", "is not a range of numbers"),
        ("99999", "is not a range of numbers"),
        ("4096", "'4096' reaches beyond 4095, more than any chain has"),
        ("0-9999", "'0-9999' reaches beyond 4095"),
        ("3,1-5", "'3,1-5' names 3 twice"),
        ("2-0,0-2", "names 0 twice"),
    ],
)
def test_what_is_no_range_is_refused(text: str, message: str) -> None:
    with pytest.raises(QuantityError) as caught:
        read_range(text)
    assert message in str(caught.value)


def test_a_range_of_a_megabyte_is_refused_at_once_in_a_short_message() -> None:
    with pytest.raises(QuantityError, match="names 0 twice") as caught:
        read_range(",".join(["0-4095"] * 150_000))
    assert len(str(caught.value)) < 200


@given(st.sets(st.integers(0, HIGHEST), min_size=1, max_size=60))
def test_what_is_written_reads_back_as_the_same_set(numbers: set[int]) -> None:
    assert read_range(write_range(list(numbers))) == tuple(sorted(numbers))


@given(st.text(max_size=12))
def test_arbitrary_text_is_a_range_without_repeats_or_refused(text: str) -> None:
    try:
        numbers = read_range(text)
    except QuantityError:
        return
    assert len(numbers) == len(set(numbers)) > 0
