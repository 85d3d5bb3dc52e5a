"""Sentences say what the numbers say: facts in the text against constructed numbers."""

import re
from dataclasses import replace

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from core.detailed_balance import limit
from core.diode import PARAMETERS, OneDiode
from core.quantity import Metrics, Quantity
from core.retelling import tell_difference, tell_losses, tell_measured
from core.sentences import MECHANISM_WORDS
from core.shares import Shares, difference_shares, loss_shares
from core.verdict import Budget, stands_out

LIMIT = limit(1.6)


def shares(photocurrent=0.0, voltage=0.0, ideality=0.0, series=0.0, shunt=0.0, *, start=18.0, residual=None, **more):
    """Shares from numbers in mW cm⁻²."""
    by_mechanism = dict(zip(PARAMETERS, (v * 1e-3 for v in (photocurrent, voltage, ideality, series, shunt)), strict=True))
    end = start * 1e-3 + sum(by_mechanism.values()) + (residual or 0.0) * 1e-3
    return Shares(start * 1e-3, end, by_mechanism, None if residual is None else residual * 1e-3, **more)


def around(told, half):
    """The same with intervals of a half-width [mW cm⁻²]."""
    intervals = {name: (v - half * 1e-3, v + half * 1e-3) for name, v in told.by_mechanism.items()}
    return replace(told, intervals=intervals)


def sentence_with(text, word):
    return next(part for part in re.split(r"(?<=\.) ", text) if word in part)


def test_the_better_device_is_named_with_its_gain():
    text = tell_difference("K1", "K2", shares(series=1.5, residual=0.0))
    assert text.startswith("K2 delivers 19.50 mW cm⁻², 1.50 mW cm⁻² (8 %) more than K1.")


def test_the_better_device_may_be_the_first():
    text = tell_difference("K1", "K2", shares(series=-1.5, voltage=0.5, residual=0.0))
    assert text.startswith("K1 delivers 18.00 mW cm⁻², 1.00 mW cm⁻² (6 %) more than K2.")
    assert "series resistance with 1.50 mW cm⁻² (150 % of the difference)" in sentence_with(text, "It comes from")
    assert sentence_with(text, "against it").startswith("Voltage (recombination) with 0.50 mW cm⁻²")


def test_leading_mechanisms_stand_in_order_with_their_part():
    text = tell_difference("A", "B", shares(0.3, 1.0, 0.0, 0.6, 0.1, residual=0.0))
    leading = sentence_with(text, "It comes from")
    assert leading.index("voltage") < leading.index("series resistance") < leading.index("photocurrent")
    assert "1.00 mW cm⁻² (50 % of the difference)" in leading and "0.60 mW cm⁻² (30 %)" in leading
    assert "shunt" not in leading  # three carry 95 %
    assert "0.10 mW cm⁻²" in sentence_with(text, "Smaller gains")


def test_one_mechanism_that_carries_nearly_all_stands_alone():
    leading = sentence_with(tell_difference("A", "B", shares(2.0, 0.05)), "It comes from")
    assert "photocurrent with 2.00" in leading
    assert "voltage" not in leading


def test_a_difference_of_models_is_called_so():
    assert "By their models" in tell_difference("A", "B", shares(1.0))
    assert "models" not in tell_difference("A", "B", shares(1.0, residual=0.0))


def test_equal_devices_are_said_to_be_equal():
    text = tell_difference("A", "B", shares(residual=0.0))
    assert text.startswith("A and B deliver the same power within rounding, 18.00 mW cm⁻².")
    assert "No mechanism contributes anything that shows." in text
    assert "%" not in text


def test_equal_powers_with_unlike_mechanisms_are_told():
    text = tell_difference("A", "B", shares(series=0.8, voltage=-0.8, residual=0.0))
    assert "same power" in text
    told = sentence_with(text, "cancel")
    assert told.index("B gains by series resistance with 0.80") < told.index("loses by voltage (recombination) with 0.80")


def test_large_shares_that_cancel_get_no_percentages():
    text = tell_difference("A", "B", shares(voltage=2.0, series=-1.9, residual=0.0))
    assert "of the difference" not in sentence_with(text, "It comes from")
    assert "largely cancel" in text


def test_a_gain_that_no_mechanism_carries_is_said_to_be_so():
    text = tell_difference("A", "B", shares(series=-0.2, residual=0.5))
    assert text.startswith("B delivers")
    assert "No mechanism of the models speaks for it." in text
    assert "0.50 mW cm⁻² larger" in text and "trust the shares" in text


def test_the_residual_is_never_hidden():
    assert "0.05 mW cm⁻² larger than that of the models" in tell_difference("A", "B", shares(1.0, residual=0.05))
    assert "0.05 mW cm⁻² smaller than that of the models" in tell_difference("A", "B", shares(1.0, residual=-0.05))
    assert "0.05 mW cm⁻² smaller than that of the models" in tell_difference("A", "B", shares(-1.0, residual=0.05)), "from worse to better"
    assert "0.80 mW cm⁻²" in sentence_with(tell_difference("A", "B", shares(series=0.8, residual=-0.8)), "models alone")
    assert "models" not in tell_difference("A", "B", shares(1.0, residual=0.001))
    assert "that of the models" not in tell_difference("A", "B", shares(1.0))


def test_a_residual_beyond_the_difference_is_a_warning():
    told = shares(series=4.0, voltage=-3.7, residual=-0.4)
    assert "trust the shares" in tell_difference("A", "B", told)
    assert "trust the shares" not in tell_difference("A", "B", shares(1.0, residual=0.05))


def test_small_gains_that_are_not_named_are_added_up():
    text = tell_difference("A", "B", shares(series=4.0, voltage=0.15, ideality=0.15))
    assert "0.30 mW cm⁻²" in sentence_with(text, "Smaller gains")


def test_a_share_whose_interval_holds_zero_is_said_to_be_open():
    told = around(shares(voltage=1.0, series=0.3), 0.4)
    text = tell_difference("A", "B", told)
    assert sentence_with(text, "Fit noise") == "Fit noise alone leaves open which way series resistance acts."


def test_digits_follow_the_intervals():
    wide = tell_difference("A", "B", around(shares(voltage=1.234, series=0.456, start=18.0), 0.3))
    assert "19.69 mW" in wide and "1.23 mW" in wide
    wider = tell_difference("A", "B", around(shares(voltage=1.234, series=0.456), 3.0))
    assert "19.69 mW" in wider  # the power itself is known better than the shares
    assert "with 1.2 mW" in wider and "1.23" not in wider


def test_dim_light_gets_the_digits_it_needs():
    text = tell_difference("A", "B", shares(photocurrent=0.0123, start=0.0500))
    assert "0.01230 mW cm⁻²" in text


def test_missing_intervals_are_explained():
    told = replace(shares(1.0), reason="Not both models are refined, so the shares have no intervals.")
    assert "Not both models are refined" in tell_difference("A", "B", told)


def test_a_slope_under_light_is_called_a_shunt_only_if_the_dark_sweep_agrees():
    told = shares(shunt=1.0)
    assert "shunt or collection with 1.00" in tell_difference("A", "B", told)
    assert "from shunt with 1.00" in tell_difference("A", "B", told, shunt_confirmed=True)


def test_assumed_conditions_are_named():
    assert "Assumed, not given: area and temperature." in tell_difference("A", "B", shares(1.0), assumed={"temperature", "area"})


def measured(power):
    value, nothing = Quantity(power * 1e-3, 1e-5), Quantity()
    return Metrics(nothing, nothing, nothing, nothing, value, nothing, nothing, nothing, nothing)


def test_the_verdict_closes_the_paragraph():
    told = shares(2.0, residual=0.0)
    noise_only = tell_difference("A", "B", told, stands_out(measured(18), measured(20)))
    assert "cannot be told" in noise_only and "another day" in noise_only
    budget = Budget(area_a=0.005, area_b=0.005, lamp=0.002)
    assert "stands out" in tell_difference("A", "B", told, stands_out(measured(18), measured(20), budget))
    assert "may be chance" in tell_difference("A", "B", told, stands_out(measured(18), measured(20), replace(budget, lamp=0.1)))
    assert "was not weighed" in tell_difference("A", "B", told)


@given(st.lists(st.floats(-3, 3), min_size=5, max_size=5), st.floats(-0.5, 0.5))
@settings(max_examples=100, deadline=None)
def test_every_number_told_of_a_mechanism_is_its_share(amounts, residual):
    told = shares(*amounts, residual=residual)
    text = tell_difference("A", "B", told)
    sign = -1.0 if text.startswith("A delivers") else 1.0
    counteracting = sentence_with(text, "against it") if "against it" in text else ""
    for name, amount in zip(PARAMETERS, amounts, strict=True):
        word = MECHANISM_WORDS[name] if name != "shunt_resistance" else "shunt or collection"
        for found in re.finditer(rf"{re.escape(word)} with (−?[\d.]+)", text, re.IGNORECASE):
            assert float(found[1]) == pytest.approx(abs(amount), abs=6e-3)
            if "same power" not in text:
                gains = sign * amount > 0
                assert gains == (found[0].lower() not in counteracting.lower())
    assert "nan" not in text and "-0" not in text and "−0.00 " not in text


DEVICE = OneDiode(0.022, 5.26341e-14 * 2, 1.6, 3.0, 2000.0)


def test_losses_are_told_in_three_sentences():
    told = loss_shares(DEVICE, 1.6)
    sentences = tell_losses("K1", told, LIMIT, 1.6)
    assert len(sentences) == 3, "and no cautions"
    assert all(sentence.count(".") - len(re.findall(r"\d\.\d", sentence)) == 1 for sentence in sentences)
    assert not any(";" in sentence for sentence in sentences)
    assert all(sentence.endswith(".") and sentence[:1].isupper() for sentence in sentences)
    first, second, third = sentences
    assert f"delivers {1e3 * told.end:.2f} mW cm⁻²" in first
    assert f"{100 * told.end / told.start:.0f} % of the 30.59 mW cm⁻²" in first
    losses = {name: -1e3 * share for name, share in told.by_mechanism.items()}
    total = sum(losses.values())
    assert f"voltage (recombination) with {losses['saturation_current']:.2f}" in second
    assert f"({100 * losses['saturation_current'] / total:.0f} % of all losses)" in second
    assert f"photocurrent with {losses['photocurrent']:.2f}" in second
    rest = losses["series_resistance"] + losses["ideality"] + losses["shunt_resistance"]
    assert f"together cost {rest:.2f} mW cm⁻²" in third


def test_an_assumed_band_gap_is_called_assumed():
    first, *_, caution = tell_losses("K1", loss_shares(DEVICE, 1.6), LIMIT, 1.6, assumed={"band_gap"})
    assert "an assumed band gap of 1.6 eV" in first
    assert all(word in caution for word in ("limit", "voltage loss", "depend", "typed gap changes both"))


@pytest.mark.parametrize("assumed", [set(), {"band_gap"}])
def test_a_gain_against_the_limit_is_told_whatever_is_assumed(assumed):
    _, _, third, caution, *_ = tell_losses("K1", shares(photocurrent=0.5, voltage=-3.0, start=30.0), LIMIT, 1.6, assumed=assumed)
    assert "gains 0.50 mW cm⁻² by photocurrent" in third
    assert "check gap, area, light and fit" in caution


def test_a_ladder_is_told_by_its_own_rungs_and_in_its_order():
    order = ("series_resistance", *(name for name in PARAMETERS if name != "series_resistance"))
    rungs = shares(voltage=-3.0, series=-4.0, shunt=-1.0, start=30.0, residual=0.0)
    _, second, _ = tell_losses("K1", rungs, LIMIT, 1.6, order=order)
    named = ["series resistance", "photocurrent", "voltage (recombination)", "ideality", "shunt or collection"]
    assert second.startswith(f"One after another: {', '.join(named)}.")
    assert "largest loss is series resistance with 4.00" in second


def test_what_is_not_shared_out_is_told_as_measured():
    text = tell_measured("K1", "K2", (0.018, 0.0195), stands_out(measured(18), measured(19.5)), ["“K2” is S-shaped."])
    assert text.startswith("K2 delivers 19.50 mW cm⁻², 1.50 mW cm⁻² (8 %) more than K1. Whether")
    assert text.endswith("“K2” is S-shaped.")
    assert tell_measured("K1", "K2", None, None, ["No power was measured."]) == "No power was measured."


def test_equal_losses_share_the_first_place():
    told = shares(voltage=-3.0, photocurrent=-3.0, series=-1.0, start=30.0, residual=0.0)
    _, second, third = tell_losses("K1", told, LIMIT, 1.6)
    assert "photocurrent and voltage (recombination), 3.00 mW cm⁻² each" in second
    assert "(86 % of all losses together)" in second
    assert third == "Series resistance costs 1.00 mW cm⁻²."


def test_a_single_loss_is_the_only_one():
    _, second, third = tell_losses("K1", shares(voltage=-3.0, start=30.0, residual=0.0), LIMIT, 1.6)
    assert second == "The only loss that shows is voltage (recombination) with 3.00 mW cm⁻²."
    assert third == "Nothing else loses anything that shows."


def test_a_device_at_its_limit_loses_nothing():
    told = difference_shares(DEVICE, DEVICE)
    assert tell_losses("K1", told, LIMIT, 1.6)[1:] == (
        "No mechanism loses anything that shows.",
        "Nothing else loses anything that shows.",
    )


def test_a_device_above_its_limit_sends_the_reader_to_gap_and_area():
    bright = replace(DEVICE, photocurrent=0.030)
    _, second, third, caution = tell_losses("K1", loss_shares(bright, 1.6), LIMIT, 1.6)
    assert "photocurrent" not in second
    assert "by photocurrent against the limit" in third
    assert "check gap, area, light and fit" in caution


def test_what_the_model_misses_of_the_device_is_told():
    *_, caution = tell_losses("K1", shares(voltage=-3.0, start=30.0, residual=-0.2), LIMIT, 1.6)
    assert caution == "The measured power lies 0.20 mW cm⁻² below the model's."


def test_notes_on_the_models_are_passed_on():
    told = replace(shares(voltage=-3.0, start=30.0), notes=("“K1” is compared through a one-diode fit made alongside.",))
    assert "through a one-diode fit made alongside." in tell_difference("K1", "K2", told)
    assert "through a one-diode fit made alongside" in tell_losses("K1", told, LIMIT, 1.6)[3]


def test_losses_without_intervals_say_why():
    told = replace(shares(voltage=-3.0, start=30.0), reason="The model is not refined, so the shares have no intervals.")
    assert tell_losses("K1", told, LIMIT, 1.6)[3] == told.reason
