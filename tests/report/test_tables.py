"""Numbers as they are written: decimals by column, six significant digits else, no negative zero."""

import numpy as np
import pandas as pd
import pytest

from aquabuf.assess.options import Options
from aquabuf.assess.sample.columns import result_columns
from aquabuf.report.tables import csv_text, result_digits, rounded


@pytest.mark.parametrize(("value", "digits", "text"), [
    (7.123456, 3, "7.123"), (-0.0004, 3, "0.0"), (0.0005001, 3, "0.001"), (12345.678, 1, "12345.7"), (np.nan, 2, ""), (-2.345678, 4, "-2.3457")])
def test_decimals_of_a_column(value, digits, text):
    """As many decimals as the table of result columns says; what is missing is empty; zero has no sign."""
    assert csv_text(rounded(pd.DataFrame({"x": [value]}), {"x": digits}), header=False) == (text or '""') + "\n"


@pytest.mark.parametrize(("value", "text"), [
    (0.000123456789, "0.000123457"), (123456.789, "123457.0"), (1.0000004, "1.0"), (0.0, "0.0"), (-0.0, "0.0"), (-1234.56789, "-1234.57"),
    (9.999999e-7, "1e-06"), (99999.96, "100000.0")])
def test_six_significant_digits_without_a_rule(value, text):
    """Other numbers keep six digits."""
    assert csv_text(rounded(pd.DataFrame({"x": [value]}), {}), header=False) == text + "\n"


def test_words_and_whole_numbers_are_untouched():
    """Only decimal numbers are rounded; commas and quotes are escaped as CSV asks; the header comes once."""
    table = pd.DataFrame({"row": [12345678], "words": ['a, "b"'], "x": [1.5]})
    assert csv_text(rounded(table, {}), header=True) == 'row,words,x\n12345678,"a, ""b""",1.5\n'


def test_every_number_of_the_results_has_its_decimals():
    """And so have the ends of its interval; two that span many powers of ten keep six digits instead."""
    digits = result_digits(Options(acid_thresholds=(5.3,)))
    numbers = [c.name for c in result_columns(Options(acid_thresholds=(5.3,))) if c.unit]
    assert "acid_to_ph_5_3_meq_l" in numbers
    assert set(numbers) - set(digits) == {"carbonate_mmol_l", "saturation_ratio_calcite"}
    for name in set(numbers) & set(digits):
        assert digits[name] == digits[f"{name}_low"] == digits[f"{name}_high"]
