"""Every key of a method definition: what it means, and what is refused in which words."""

import pytest

from calib.bench.acceptance_settings import preset_limits, preset_names, preset_of_early_method
from calib.bench.method_definition import read_definition
from calib.bench.register import add_method, show_method
from calib.curves.noise import NoiseModel
from calib.errors import CalibError

FULL = """
name = "  nitrate "
analyte = "nitrate"
concentration_unit = "µg/l"
response_unit = "nA"
model = "4PL"
fixed = { infinite = 0.0 }
bounds = { slope = [0.3, 4] }
noise = "relative"
interval_confidence = 0.9
fit_blank = true
reference_concentrations = [1, 5, 20.0]
required_cv = 0.1
[acceptance]
preset = "plain"
relative_error = 0.1
blank = 0.5
[curve]
valid_for = "90 min"
"""
SHORT = """
name = "m"
analyte = "a"
concentration_unit = "mg/L"
response_unit = "1"
model = "line"
"""
PLAIN = '[acceptance]\npreset = "plain"\n'


def test_every_key_is_read():
    method = read_definition(FULL, version=3)
    assert (method.name, method.analyte, method.concentration_unit) == ("nitrate", "nitrate", "ug/L")
    assert (method.response_unit, method.model, method.noise) == ("nA", "4PL", "relative")
    assert method.fixed == {"infinite": 0.0}
    assert method.bounds == {"slope": (0.3, 4.0)}
    assert (method.interval_confidence, method.fit_blank, method.required_cv) == (0.9, True, 0.1)
    assert method.reference_concentrations == (1.0, 5.0, 20.0)
    assert (method.preset, method.valid_hours) == ("plain", 1.5)


def test_what_is_left_out_has_a_default():
    method = read_definition(SHORT + PLAIN)
    assert (method.fixed, method.bounds, method.noise) == ({}, {}, "uniform")
    assert (method.interval_confidence, method.fit_blank, method.required_cv) == (0.95, False, 0.2)
    assert (method.reference_concentrations, method.valid_hours) == ((), 24.0)


def test_own_limits_stand_over_the_preset_and_name_their_source():
    limits = read_definition(FULL, version=3).limits
    assert limits["relative_error"].value == 0.1
    assert limits["relative_error"].source == "method nitrate version 3"
    assert limits["relative_error"].checked == "method"
    assert limits["minimum_levels"] == preset_limits("plain")["minimum_levels"]


def test_a_wider_limit_of_the_method_takes_narrower_ends_of_the_preset_with_it():
    limits = read_definition(SHORT + PLAIN + "relative_error = 0.4\n").limits
    assert "relative_error_lowest" not in limits


@pytest.mark.parametrize("preset", preset_names())
def test_every_preset_makes_a_method_by_itself(preset):
    assert read_definition(SHORT + f'[acceptance]\npreset = "{preset}"\n').limits


@pytest.mark.parametrize("written", ["90 min", "1.5h", " 1.5 h ", "0.0625 d"])
def test_times_are_written_in_three_units(written):
    assert read_definition(SHORT + PLAIN + f'[curve]\nvalid_for = "{written}"\n').valid_hours == 1.5


def test_an_assumed_noise_is_a_noise_model():
    method = read_definition(SHORT + 'noise = { assumed = "response", exponent = 1.0 }\n' + PLAIN)
    assert isinstance(method.noise, NoiseModel)


@pytest.mark.parametrize(
    "key", ["name", "analyte", "concentration_unit", "response_unit", "model", "acceptance"]
)
def test_a_missing_key_is_named(key):
    kept = [line for line in SHORT.splitlines() if not line.startswith(f"{key} ")]
    text = "\n".join(kept) + ("\n" if key == "acceptance" else "\n" + PLAIN)
    with pytest.raises(CalibError, match=f"the method lacks '{key}'; add it"):
        read_definition(text)


@pytest.mark.parametrize(
    ("line", "words"),
    [
        ("colour = 1", "unknown key 'colour' in the method; known are name, analyte"),
        ('noise = "histories"', r"noise = 'histories' is unknown; known are uniform, .*, history"),
        ('noise = "loud"', "noise = 'loud' is unknown; known are uniform"),
        ("noise = 3", "noise must be a name or"),
        ('noise = { assumed = "response", power = 1 }', "noise must be a name or"),
        ('noise = { assumed = "response", exponent = "x" }', r"noise.exponent = 'x' must be a finite number"),
        ('noise = { assumed = "weather" }', "weather"),
        ("fixed = 3", r"fixed must be a table such as fixed = \{ intercept"),
        (
            "fixed = { offset = 0 }",
            r"fixed.offset: model 'line' has no such parameter; it has intercept, slope",
        ),
        ('fixed = { slope = "1" }', r"fixed.slope = '1' must be a finite number"),
        ("fixed = { slope = inf }", r"fixed.slope = inf must be a finite number"),
        ("fixed = { slope = true }", r"fixed.slope = True must be a finite number"),
        ("bounds = { slope = 1 }", r"bounds.slope = 1 must be \[lower, upper\]"),
        ("bounds = { slope = [1, 2, 3] }", r"must be \[lower, upper\]"),
        ("bounds = { slope = [2, 1] }", "the lower bound must be below the upper"),
        ("bounds = { tilt = [1, 2] }", "bounds.tilt: model 'line' has no such parameter"),
        ("interval_confidence = 95", "interval_confidence = 95 must lie between 0.5 and 0.9999"),
        ("interval_confidence = nan", "interval_confidence = nan must be a finite number"),
        ('fit_blank = "yes"', "fit_blank = 'yes' must be true or false"),
        ("required_cv = 0", "required_cv = 0 must lie between 0.001 and 1"),
        ("reference_concentrations = [1, 2]", r"must be \[low, middle, high\]"),
        ("reference_concentrations = [1, 3, 2]", "must rise and lie above 0"),
        ("reference_concentrations = [0, 1, 2]", "must rise and lie above 0"),
        ("reference_concentrations = 4", r"must be \[low, middle, high\]"),
        ("curve = 24", r"\[curve\] knows the keys valid_for"),
        ('curve = { valid = "24 h" }', r"\[curve\] knows the keys valid_for"),
        ('curve = { valid_for = "soon" }', "curve.valid_for = 'soon' must be a time such as"),
        ('curve = { valid_for = "0 h" }', "must be a time such as"),
        ("curve = { valid_for = 24 }", "curve.valid_for = 24 must be a time such as"),
        ('curve = { valid_for = "99999999999999 d" }', "is longer than ten years"),
    ],
)
def test_a_wrong_value_is_refused_in_words(line, words):
    with pytest.raises(CalibError, match=words) as caught:
        read_definition(SHORT + line + "\n" + PLAIN)
    assert "\n" not in str(caught.value)


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ('name = "m"', "name = 3", "name = 3 must be text in quotes"),
        ('analyte = "a"', 'analyte = " "', "analyte = ' ' must be text in quotes"),
        ('"mg/L"', '"cups"', "'cups' is no known unit of concentration: use one of pg/L"),
        ('response_unit = "1"', "response_unit = 1", "response_unit = 1 must be text in quotes"),
        ('model = "line"', 'model = "spline"', "model: .*spline"),
        ('name = "m"', "name = m", "the method is not readable as TOML: .*; correct the text"),
    ],
)
def test_a_wrong_word_is_refused_in_words(old, new, words):
    with pytest.raises(CalibError, match=words):
        read_definition(SHORT.replace(old, new) + PLAIN)


@pytest.mark.parametrize(
    ("acceptance", "words"),
    [
        ("acceptance = 3", "acceptance needs preset ="),
        ("[acceptance]\nblank = 1", "acceptance needs preset ="),
        ('[acceptance]\npreset = "easy"', "acceptance.preset = 'easy' is unknown; known are bioanalytical"),
        ("[acceptance]\npreset = 3", "acceptance.preset = .*3.* is unknown"),
        (PLAIN + "taste = 1", "unknown acceptance limit 'taste'; allowed are relative_error"),
        (PLAIN + 'blank = "low"', "acceptance.blank = 'low' must be a finite number"),
        (PLAIN + "blank = -1", "blank: the limit -1 is not a number of at least 0"),
        (PLAIN + "standards_passing = 75", "standards_passing: 75 is no share"),
        (PLAIN + "minimum_levels = 5.5", "minimum_levels: 5.5 is no count"),
        (PLAIN + 'blank = "1 cup"', "acceptance.blank = '1 cup': 'cup' is no known unit"),
        (PLAIN + 'minimum_levels = "5 %"', "acceptance.minimum_levels = '5 %' must be a finite number"),
        (PLAIN + 'left_out = ["beauty"]', "acceptance.left_out: the preset has no limit 'beauty'"),
        (PLAIN + "left_out = 3", "acceptance.left_out = 3 must be a list of limits"),
        (PLAIN + 'warn_only = ["blank"]', "acceptance.warn_only: the method has no limit 'blank'"),
        (PLAIN + 'left_out = ["relative_error"]', "no relative-error measure"),
        (PLAIN + "blank = { source = 'x' }", "acceptance.blank: a limit is a value, or a table of value"),
        (PLAIN + "blank = { value = 1, checked = 'yes' }", "acceptance.blank.checked = 'yes' is unknown"),
        (PLAIN + "relative_error_lowest = 0.1", r"narrower than relative_error \(20 %\)"),
    ],
)
def test_wrong_limits_are_refused_in_words(acceptance, words):
    with pytest.raises(CalibError, match=words):
        read_definition(SHORT + acceptance + "\n")


def test_limits_are_written_as_people_write_them():
    acceptance = (
        PLAIN
        + 'blank = "50 ug/L"\nrelative_error = "15 %"\ncontrol_recovery = 0.2\ncontrols_passing = "2/3"\n'
    )
    limits = read_definition(SHORT + acceptance).limits
    assert limits["blank"].value == pytest.approx(0.05, rel=1e-15)  # the method's unit is mg/L
    assert limits["relative_error"].value == 0.15
    assert limits["controls_passing"].value == 2 / 3


def test_an_own_limit_may_name_its_source():
    acceptance = PLAIN + 'blank = { value = "0.1 mg/L", source = "rule 7", checked = "verified" }\n'
    limit = read_definition(SHORT + acceptance).limits["blank"]
    assert (limit.value, limit.source, limit.checked) == (0.1, "rule 7", "verified")


def test_limits_of_the_preset_can_be_left_out_or_only_warn():
    acceptance = PLAIN + 'left_out = ["lack_of_fit"]\nwarn_only = ["minimum_levels"]\n'
    limits = read_definition(SHORT + acceptance).limits
    assert "lack_of_fit" not in limits
    assert limits["minimum_levels"].warns


@pytest.mark.parametrize(
    ("text", "line"),
    [
        (SHORT + PLAIN + "taste = 1\n", 9),
        (SHORT + PLAIN + '\n# a remark\nblank = "low"\n', 11),
        (SHORT + PLAIN + "[curve]\nvalid_for = 3\n", 10),
        (SHORT + "fixed = { tilt = 1 }\n" + PLAIN, 7),
        (SHORT.replace('"mg/L"', '"cups"') + PLAIN, 4),
        (SHORT + "colour = 1\n" + PLAIN, 7),
        (SHORT + PLAIN.replace("plain", "easy"), 8),
    ],
)
def test_a_refusal_names_the_line_of_the_text(text, line):
    with pytest.raises(CalibError, match=rf"^line {line}: "):
        read_definition(text)


def test_a_concentration_without_its_unit_is_refused_when_the_method_is_added(bench):
    file = bench.file("new.toml", SHORT + PLAIN + "blank = 0.1\n")
    with pytest.raises(
        CalibError,
        match=r'line 9: acceptance\.blank is a concentration and has no unit; write blank = "0\.1 mg/L"',
    ):
        add_method(bench.store, file, by="KM")


def test_the_preset_is_kept_beside_the_method_as_it_was(bench, monkeypatch):
    file = bench.file("new.toml", SHORT + PLAIN)
    add_method(bench.store, file, by="KM")
    before = show_method(bench.store, "m").definition.limits
    monkeypatch.setattr("calib.bench.acceptance_settings.preset_text", lambda name: "")
    assert show_method(bench.store, "m").definition.limits == before


def test_methods_added_before_presets_were_kept_have_the_limits_of_that_time():
    text = SHORT + '[acceptance]\npreset = "environmental"\n'
    early = read_definition(text, preset=preset_of_early_method(text)).limits
    assert sorted(early) == [
        "check_recovery",
        "first_check_recovery",
        "minimum_levels",
        "relative_error",
        "relative_error_lowest",
        "relative_standard_error",
    ]
