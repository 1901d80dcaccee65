"""The use case: mixtures, temperatures, directions, scales, what is kept, what is refused."""

from __future__ import annotations

import threading
from dataclasses import replace

import numpy as np
import pytest

from band_oracles import rotation
from ladderband.numerics.accuracy import Deadline
from ladderband.numerics.axis import Axis
from ladderband.numerics.errors import DeadlineExceeded, DomainError
from ladderband.numerics.transition import Mode, Moment, Transition
from ladderband.usecases import bands as module
from ladderband.usecases.bands import bands
from ladderband.usecases.bands_question import BandsQuestion, LineShape, Species
from ladderband.usecases.kept_transitions import KeptTransition, KeptTransitions
from ladderband.usecases.limits import CostLimitExceeded, Limits

MODES = (Mode(900.0, 1010.0, 0.9), Mode(1500.0, 1300.0, -0.7))
LINE = Transition(
    MODES,
    origin_cm1=20000.0,
    temperature_k=300.0,
    mixing=rotation(2, np.random.default_rng(1), 0.3),
    moment=Moment(np.array([0.0, 0.0, 2.0]), np.zeros((2, 3))),
)
AXIS = Axis("cm-1", np.linspace(17000.0, 30000.0, 900))
SHAPE = LineShape("gaussian", 150.0)


def ask(*species, **more):
    question = BandsQuestion(
        species or (Species(LINE),), more.pop("axis", AXIS), more.pop("shape", SHAPE), **more
    )
    return bands(question, Limits(work_s=30.0), Deadline.none())


def test_mixture_is_the_weighted_sum():
    other = replace(LINE, modes=(MODES[0], replace(MODES[1], displacement=1.4)), origin_cm1=19000.0)
    for scale in ("unit_area", "molar_absorption_coefficient"):
        one = ask(Species(LINE), scale=scale).bands[0]
        two = ask(Species(other), scale=scale).bands[0]
        both = ask(Species(LINE, 3.0), Species(other, 1.0), scale=scale).bands[0]
        limit = one.accuracy.bound + two.accuracy.bound + both.accuracy.bound
        assert both.intensity == pytest.approx(
            0.75 * one.intensity + 0.25 * two.intensity, abs=limit
        )
        assert len(both.positions) == 2
        assert both.moments.mean_cm1 == pytest.approx(
            0.75 * one.moments.mean_cm1 + 0.25 * two.moments.mean_cm1
        )


def test_moments_of_a_mixture_are_those_on_the_axis():
    other = replace(LINE, modes=(MODES[0], replace(MODES[1], displacement=1.0)), origin_cm1=19400.0)
    wide = Axis("cm-1", np.linspace(10000.0, 45000.0, 8001))
    found = ask(Species(LINE), Species(other, 0.5), axis=wide, scale="unit_area").bands[0]
    sigma2 = (150.0**2) / (8.0 * np.log(2.0))
    assert found.moments_on_axis.mean_cm1 == pytest.approx(found.moments.mean_cm1, rel=1e-7)
    assert found.moments_on_axis.standard_deviation_cm1**2 == pytest.approx(
        found.moments.standard_deviation_cm1**2 + sigma2, rel=1e-4
    )


def test_moments_of_emission_are_mirrored():
    down = replace(LINE, process="emission")
    wide = Axis("cm-1", np.linspace(1000.0, 32000.0, 6001))
    found = ask(Species(down), axis=wide, scale="unit_area").bands[0]
    assert found.moments.skewness < 0.0
    assert found.moments_on_axis.mean_cm1 == pytest.approx(found.moments.mean_cm1, rel=1e-7)
    assert found.moments_on_axis.skewness == pytest.approx(found.moments.skewness, rel=0.05)


def test_several_temperatures_are_those_asked_one_by_one():
    answer = ask(temperatures_k=(0.0, 77.0, 400.0), both_directions=True)
    assert [(band.process, band.temperature_k) for band in answer.bands] == [
        (process, t) for process in ("absorption", "emission") for t in (0.0, 77.0, 400.0)
    ]
    alone = ask(Species(replace(LINE, temperature_k=77.0))).bands[0]
    assert np.array_equal(answer.bands[1].intensity, alone.intensity)
    assert len(answer.stokes_shift_cm1) == 3
    assert answer.stokes_shift_cm1[0] == pytest.approx(
        answer.bands[0].moments.mean_cm1 - answer.bands[3].moments.mean_cm1
    )


def test_direction_asked_first_does_not_change_the_stokes_shift():
    from ladderband.numerics.reversal import reversed_transition

    up = ask(both_directions=True).stokes_shift_cm1
    down = ask(Species(reversed_transition(LINE)), both_directions=True).stokes_shift_cm1
    assert up == pytest.approx(down)
    assert up[0] > 0.0


@pytest.mark.parametrize("unit", ["cm-1", "eV", "nm", "THz"])
def test_unit_area_is_in_the_unit_of_the_axis(unit):
    values = {
        "cm-1": np.linspace(16000.0, 34000.0, 4001),
        "eV": np.linspace(2.0, 4.2, 4001),
        "nm": np.linspace(295.0, 620.0, 4001),
        "THz": np.linspace(480.0, 1020.0, 4001),
    }[unit]
    answer = ask(axis=Axis(unit, values), scale="unit_area")
    assert np.trapezoid(answer.bands[0].intensity, values) == pytest.approx(1.0, abs=2e-3)
    assert answer.intensity_unit == f"1 per {unit}"


def test_own_points_get_the_values_of_a_range():
    points = AXIS.values[[3, 4, 10, 500]]
    some = ask(axis=Axis("cm-1", points), scale="unit_area").bands[0]
    all_of_them = ask(scale="unit_area").bands[0]
    limit = some.accuracy.bound + all_of_them.accuracy.bound
    assert some.intensity == pytest.approx(all_of_them.intensity[[3, 4, 10, 500]], abs=limit)


def test_relative_scale_has_its_maximum_at_one():
    found = ask().bands[0]
    assert found.intensity.max() == 1.0
    assert found.accuracy.bound < 1e-6


def test_axis_outside_the_band_warns_with_the_real_range():
    answer = ask(axis=Axis("nm", np.linspace(900.0, 1000.0, 11)))
    assert not answer.bands[0].intensity.any()
    (warning,) = answer.warnings
    assert "outside the absorption band" in warning
    assert "nm)" in warning
    assert answer.bands[0].moments_on_axis is None


def test_missing_moment_warns_on_an_absolute_scale():
    answer = ask(Species(replace(LINE, moment=None)), scale="cross_section")
    assert any("1 debye" in warning for warning in answer.warnings)
    assert ask(scale="cross_section").warnings == ()


@pytest.mark.parametrize(
    ("more", "message", "pointer"),
    [
        ({"scale": "photon_rate"}, "belongs to emission", "/scale"),
        ({"shape": LineShape("gaussian", 0.0)}, "line width above zero", "/line_shape/fwhm_cm1"),
        (
            {"scale": "cross_section", "axis": Axis("cm-1", np.array([-1.0, 1.0]))},
            "above 0 cm",
            "/axis",
        ),
        ({"shape": LineShape("lorentzian", 1e-3)}, "too narrow", "/line_shape"),
    ],
)
def test_refusals(more, message, pointer):
    with pytest.raises(DomainError, match=message) as caught:
        ask(**more)
    assert caught.value.pointer == pointer


def test_species_of_different_processes_are_refused():
    with pytest.raises(DomainError, match="share one process"):
        ask(Species(LINE), Species(replace(LINE, process="emission")))


def test_cost_is_refused_before_the_work():
    rng = np.random.default_rng(1)
    n = 60
    big = Transition(
        tuple(Mode(float(g), float(g), 0.3) for g in rng.uniform(300.0, 1600.0, n)),
        temperature_k=300.0,
        mixing=rotation(n, rng, 0.02),
    )
    question = BandsQuestion((Species(big),), AXIS, LineShape("gaussian", 0.5))
    with pytest.raises(CostLimitExceeded) as caught:
        bands(question, Limits(work_s=0.5), Deadline.none())
    assert caught.value.estimate_s > 0.5
    assert "wider lines" in str(caught.value)


def test_deadline_stops_the_work():
    with pytest.raises(DeadlineExceeded):
        bands(BandsQuestion((Species(LINE),), AXIS, SHAPE), Limits(), Deadline.after(-1.0))


def test_labels_are_the_strongest_lines_on_the_axis():
    from ladderband.numerics.warm import warm
    from ladderband.usecases.lines import LinesQuestion, lines

    warm()  # a first compilation takes longer than labels may
    band = ask(label_lines=5, axis=Axis("eV", np.linspace(2.4, 2.7, 50))).bands[0]
    (found,) = band.lines
    low, high = 2.4 * 8065.54394, 2.7 * 8065.54394
    every = lines(LinesQuestion(LINE, tolerance=1e-8), Limits(), Deadline.none()).lines
    inside = (every.position_cm1 >= low) & (every.position_cm1 <= high)
    inside &= every.intensity >= 0.01 * every.intensity.max()
    assert inside.sum() >= 3
    assert found.position_cm1.tolist() == pytest.approx(every.position_cm1[inside][:5].tolist())
    assert ask().bands[0].lines == ()


def test_band_goes_without_labels_where_they_would_take_long():
    rng = np.random.default_rng(3)
    wavenumbers = rng.uniform(30.0, 400.0, 90)
    many = Transition(
        tuple(Mode(float(w), float(w), 0.9) for w in wavenumbers), "absorption", 20000.0, 400.0
    )
    answer = ask(Species(many), label_lines=10)
    assert answer.bands[0].lines == () or len(answer.bands[0].lines[0]) <= 10
    assert bool(answer.bands[0].lines) != any("No labels" in text for text in answer.warnings)


def test_scale_is_refused_before_any_work(monkeypatch):
    asked = counted(monkeypatch)
    with pytest.raises(DomainError, match="belongs to emission"):
        ask(scale="photon_rate")
    assert asked == []


# --- what is kept ---


def counted(monkeypatch):
    """Times at which chi is evaluated."""
    from ladderband.usecases import kept_transitions

    asked = []
    original = kept_transitions.correlation_function

    def counting(modes, step, start, stop, deadline):
        asked.append(stop - start)
        return original(modes, step, start, stop, deadline)

    monkeypatch.setattr(kept_transitions, "correlation_function", counting)
    monkeypatch.setattr(module, "_KEPT", KeptTransitions())
    return asked


def test_other_widths_axes_origins_and_scales_share_the_work(monkeypatch):
    asked = counted(monkeypatch)
    ask()
    first = sum(asked)
    ask(shape=LineShape("gaussian", 170.0), scale="unit_area")
    ask(Species(replace(LINE, origin_cm1=20500.0)), shape=LineShape("gaussian", 155.0))
    assert sum(asked) == first
    ask(shape=LineShape("gaussian", 140.0))
    assert first < sum(asked) < 1.3 * first  # only the times not yet known
    ask(Species(replace(LINE, temperature_k=301.0)))
    assert sum(asked) > 1.9 * first


def test_kept_answers_equal_fresh_ones(monkeypatch):
    counted(monkeypatch)
    ask(shape=LineShape("gaussian", 100.0))
    kept = ask(shape=LineShape("gaussian", 140.0)).bands[0]
    counted(monkeypatch)
    fresh = ask(shape=LineShape("gaussian", 140.0)).bands[0]
    assert np.array_equal(kept.intensity, fresh.intensity)


def test_memory_is_bounded():
    store = KeptTransitions(limit_bytes=24 * 1000)
    for index in range(20):
        kept = store.get(replace(LINE, temperature_k=100.0 + index))
        kept.correlation(2.0**-13, 300, Deadline.none())
        store.trim()
        assert len(store) <= 3
    assert store.get(replace(LINE, temperature_k=119.0)) is kept
    assert store.get(replace(LINE, temperature_k=100.0)).have(2.0**-13) == 0


def test_threads_share_it_safely():
    store = KeptTransitions()
    steps = [2.0**-12, 2.0**-13]
    alone = {
        step: KeptTransition(LINE).correlation(step, 400, Deadline.none()).value for step in steps
    }
    wrong = []

    def work(seed):
        rng = np.random.default_rng(seed)
        for _ in range(20):
            step, count = steps[rng.integers(2)], int(rng.integers(1, 400))
            found = store.get(LINE).correlation(step, count, Deadline.none())
            if not np.array_equal(found.value, alone[step][:count]):
                wrong.append((step, count))

    threads = [threading.Thread(target=work, args=(seed,)) for seed in range(6)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert not wrong
