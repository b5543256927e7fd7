"""A report in a terminal."""

from dataclasses import replace

from hypothesis import given
from hypothesis import strategies as st

from quarterturn.errors import display_width
from quarterturn.reports.cells import cells, format_exact
from quarterturn.reports.report import Report, Row
from quarterturn.reports.text import WIDTH, text, wrapped

GOLDEN = """\
oscillator, sampled
w = 1

observable      value                  exact       pull   tau         n_eff   remark
──────────────────────────────────────────────────────────────────────────────────────────────────────────
<q^2>             0.4996(12)             0.50000   -0.3   0.630(21)   12400
<q(1) q(0)>_c   -12.26(21)             -12.250     -0.1   0.71          980
gap(q)            1.0003(34)             1.00000   +0.1                       three windows, averaged
binder            0.4123(unresolved)     0.4                                  run ten times longer
<Q^2>           withheld                                                      the winding number changed 3
                                                                              times

<q(t) q(0)>: 41 points, t = 0 to 4
effective gap(q): 31 points, t = 0 to 3

Warning: binder: the autocorrelation time could not be resolved.

method   Hamiltonian Monte Carlo
chains   64 x 400 draws
record   3fa2c19b77e0; checked by: quarterturn verify NOTEBOOK"""


def test_sampled_report_reads_as_agreed(sampled):
    assert text(sampled) == GOLDEN


def test_levels_show_only_the_columns_that_hold_something(solved):
    assert text(solved).splitlines()[2].split() == ["observable", "value"]
    assert "E_0          0.50000000000000(20)" in text(solved)


def test_withheld_number_is_not_shown_even_where_the_row_holds_one(sampled):
    assert "0.77" not in text(sampled)


def test_unresolved_number_shows_neither_its_error_nor_a_pull():
    row = cells(Row("a", "a", 0.41234, 0.0001, 0.4, 123.0, state="unresolved"))
    assert row.value == "0.4123(unresolved)"
    assert row.pull == ""


def test_number_that_is_not_finite_is_withheld_with_a_reason():
    row = cells(Row("a", "a", float("nan"), 0.1))
    assert (row.value, row.remark) == ("withheld", "no finite number came out")


@given(st.lists(st.tuples(st.floats(-9e4, 9e4), st.floats(1e-6, 1e3)), min_size=1, max_size=6))
def test_decimal_points_stand_below_each_other(numbers):
    rows = tuple(Row("é界", "q", value, error) for value, error in numbers)
    lines = text(Report("sample", "t", "", "", (), rows)).splitlines()[-len(rows) :]
    lines = [line for line in lines if "e-" not in line and "e+" not in line]
    ends = {
        display_width(line[: line.index(".") if "." in line.partition("(")[0] else line.index("(")]) for line in lines
    }
    assert len(ends) <= 1


@given(st.text(max_size=300), st.integers(1, 60))
def test_wrapping_keeps_every_word_and_the_width(words, width):
    lines = wrapped(words, width)
    assert " ".join(lines).split() == words.split()
    assert all(display_width(line) <= width or " " not in line.strip() for line in lines)


@given(st.text(max_size=50))
def test_no_label_breaks_the_table_or_steers_the_terminal(label):
    shown = text(Report("sample", "t", "", "", (), (Row(label, "", 1.0, 0.1, remark=label),)))
    assert all(letter.isprintable() for line in shown.split("\n") for letter in line)
    assert "1.00(10)" in shown


def test_long_remarks_go_on_below_and_lines_stay_narrow(sampled):
    long = replace(sampled, rows=(Row("a", "a", 1.0, 0.1, remark="word " * 60), *sampled.rows))
    assert max(map(display_width, text(long).splitlines())) <= WIDTH


def test_exact_value_has_one_digit_more_than_the_measured_one():
    assert format_exact(0.30604417, 0.0012) == "0.30604"
    assert format_exact(-1234.5678, 25.0) == "-1234.6"
    assert format_exact(3.0604417e-9, 1.2e-11) == "3.0604e-09"
    assert format_exact(0.30604417, None) == "0.30604417"
    assert format_exact(None, 0.1) == ""
