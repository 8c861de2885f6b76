"""What a method sets, in words."""

from small_laboratory import METHOD

from calib.acceptance import Limit
from calib.bench.method_definition import read_definition
from calib.report.limit_wording import limit_text, settings_in_words

TEXT = (
    METHOD.format(name="m", analyte="a").replace("residual_sd = 0.2", "standards_passing = 0.75")
    + """
[exclusion]
rule = "most deviant first"
most = 2
[results]
reporting_limit = "0.5 mg/L"
minimum_replicates = 2
replicate_cv = 0.2
dilution_agreement = "20 %"
internal_standard = [0.6, 1.25]
[checks]
bracket = true
every = 10
[specification]
upper = "5 mg/L"
decision_rule = "guarded acceptance"
"""
)


def test_a_limit_is_written_with_what_it_is_counted_in():
    assert limit_text("relative_error", Limit(0.15, "x", "method"), "mg/L") == "15 %"
    assert limit_text("blank", Limit(0.2, "x", "method"), "mg/L") == "0.2 mg/L"
    assert limit_text("minimum_levels", Limit(6, "x", "method"), "mg/L") == "6"
    assert limit_text("lack_of_fit", Limit(0.01, "x", "method", warns=True), "mg/L") == "0.01 (warns)"


def test_every_setting_is_said_in_a_sentence():
    assert settings_in_words(read_definition(TEXT)) == (
        "failing standards are left out, most deviant first (single readings, 2 at most), while 75 % of them and "
        "5 levels remain",
        "reporting limit 0.5 mg/L, times the dilution",
        "a result needs 2 readings",
        "coefficient of variation of the responses of a sample at most 20.0 %",
        "dilutions of one sample agree within 20.0 %; which counts: least diluted",
        "internal standard of a sample 60.0 % to 125.0 % of that of the standards",
        "a sample counts only between two passing check standards, no more than 10 samples apart",
        "specification: at most 5 mg/L, by guarded acceptance, guard band 1 U",
        "a curve needs a passing check after: maintenance, part, move, software, lot",
    )


def test_a_plain_method_says_little():
    assert settings_in_words(read_definition(METHOD.format(name="m", analyte="a"))) == (
        "a curve needs a passing check after: maintenance, part, move, software, lot",
    )
