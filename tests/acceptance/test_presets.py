from pathlib import Path

import pytest

import calib.acceptance
from calib.acceptance import criteria_from, read_preset
from calib.acceptance.limits import CHECKED
from calib.errors import MethodError

PRESETS = {
    p.stem: p.read_text("utf-8") for p in (Path(calib.acceptance.__file__).parent / "presets").glob("*.toml")
}

# Figures: ICH M10 2022 and FDA 2018 (read in texts that quote them), EAEU bioanalysis rule par. 93 (read),
# Standard Methods 2020, 4020, 6020 and ICH Q2(R1) (read), EPA 8000D (from memory);
# the plain preset is common practice but for its number of levels.
CONTROLS = {
    "controls_passing": 2 / 3,
    "controls_passing_each_level": 0.5,
    "control_levels": 3,
    "minimum_controls": 6,
    "minimum_control_share": 0.05,
    "controls_in_sample_range": 2,
}
FIGURES = {
    "bioanalytical-chromatographic": {
        "relative_error": 0.15,
        "relative_error_lowest": 0.20,
        "standards_passing": 0.75,
        "levels_passing": 6,
        "minimum_levels": 6,
        "minimum_blanks": 1,
        "minimum_zeros": 1,
        "carry_over": 0.20,
        "control_recovery": 0.15,
        **CONTROLS,
    },
    "bioanalytical-ligand-binding": {
        "relative_error": 0.20,
        "relative_error_lowest": 0.25,
        "relative_error_highest": 0.25,
        "standards_passing": 0.75,
        "levels_passing": 6,
        "minimum_levels": 6,
        "control_recovery": 0.20,
        **CONTROLS,
    },
    "environmental": {
        "relative_error": 0.30,
        "relative_error_lowest": 0.50,
        "relative_standard_error": 0.20,
        "minimum_levels": 5,
        "first_check_recovery": 0.15,
        "check_recovery": 0.20,
        "response_factor_rsd": 0.20,
        "top_slope": 0.5,
        "blank_share": 0.5,
    },
    "metals-frequent-checks": {
        "relative_error": 0.10,
        "minimum_levels": 5,
        "first_check_recovery": 0.10,
        "check_recovery": 0.10,
        "opening_check_recovery": 0.05,
        "minimum_checks": 2,
        "top_of_range": 0.90,
        "top_slope": 0.5,
        "blank_share": 0.5,
    },
    "drinking-water-checks": {
        "relative_error": 0.10,
        "relative_error_lowest": 0.20,
        "minimum_levels": 5,
        "r_squared": 0.990025,
        "top_slope": 0.5,
        "first_check_recovery": 0.15,
        "check_recovery": 0.10,
        "minimum_checks": 1,
        "blank_share": 0.5,
    },
    "plain": {
        "relative_error": 0.20,
        "relative_error_lowest": 0.25,
        "minimum_levels": 5,
        "check_recovery": 0.15,
        "lack_of_fit": 0.01,
    },
}


@pytest.mark.parametrize("name", sorted(FIGURES))
def test_the_figures_of_each_preset(name):
    assert {key: limit.value for key, limit in read_preset(PRESETS[name]).items()} == FIGURES[name]


def test_every_preset_is_known_here():
    assert set(PRESETS) == set(FIGURES)


@pytest.mark.parametrize("name", sorted(FIGURES))
def test_every_preset_makes_criteria_and_says_how_each_limit_was_checked(name):
    preset = read_preset(PRESETS[name])
    assert criteria_from(preset)
    assert all(limit.source and limit.checked in CHECKED[:-1] for limit in preset.values())


# TNI 1.7.1.1(f) for a line (second-hand), EPA 8000D for an average factor (from memory), Standard Methods 6020
# for a quadratic (read); 4PL and 5PL are common practice.
@pytest.mark.parametrize(
    ("model", "levels"), [("line", 5), ("proportional", 4), ("quadratic", 6), ("4PL", 6), ("5PL", 7)]
)
@pytest.mark.parametrize("name", ["environmental", "metals-frequent-checks", "drinking-water-checks"])
def test_the_number_of_levels_depends_on_the_model(name, model, levels):
    assert read_preset(PRESETS[name], model)["minimum_levels"].value == levels


def test_a_limit_may_only_warn():
    assert read_preset(PRESETS["plain"])["lack_of_fit"].warns
    assert not read_preset(PRESETS["plain"])["relative_error"].warns


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("relative_error = ", "not readable as TOML"),
        ("relative_error = 0.15", "relative_error: give exactly value, source and checked"),
        ("[blank]\nvalue = 1\nsource = 'x'", "blank: give exactly"),
        ("[blank]\nvalue = 1\nsource = 'x'\nchecked = 'verified'\nunit = 'g'", "blank: give exactly"),
        ("[blank]\nvalue = '1'\nsource = 'x'\nchecked = 'verified'", "value '1' is not a number"),
        ("[blank]\nvalue = true\nsource = 'x'\nchecked = 'verified'", "value True is not a number"),
        ("[blank]\nvalue = 1\nsource = ' '\nchecked = 'verified'", "name the source"),
        ("[blank]\nvalue = 1\nsource = 'x'\nchecked = 'yes'", "checked is 'yes'; allowed are verified"),
    ],
)
def test_a_broken_preset_is_refused(text, words):
    with pytest.raises(MethodError, match=words):
        read_preset(text)
