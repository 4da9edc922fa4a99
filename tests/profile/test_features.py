"""Features against closed forms (Munk, linear layers), the Airy function, and noise."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq
from scipy.special import ai_zeros

from ocean_sound.errors import InputError
from ocean_sound.profile import Profile


def munk(depth):
    """Munk's canonical profile (Munk 1974, J. Acoust. Soc. Am. 55, 220-226), as written since with 0.00737."""
    eta = 2.0 * (np.asarray(depth, dtype=float) - 1300.0) / 1300.0
    return 1500.0 * (1.0 + 0.00737 * (eta - 1.0 + np.exp(-eta)))


def munk_profile(step=1.0, bottom=5000.0):
    depth = np.arange(0.0, bottom + step / 2, step)
    return Profile(depth, munk(depth), id="munk")


class TestMunk:
    def test_axis(self):
        features = munk_profile().features()
        assert features.axis_depth == 1300.0
        assert features.axis_speed == pytest.approx(1500.0, abs=1e-9)
        assert features.sonic_layer_depth == 0.0
        assert features.ducts[0].top == 0.0

    def test_critical_depth_and_excess(self):
        features = munk_profile().features(seabed_depth=5200.0)
        critical = brentq(lambda z: munk(z) - munk(0.0), 1300.0, 5000.0)
        assert features.critical_depth == pytest.approx(critical, abs=1e-3)
        assert features.depth_excess == pytest.approx(5200.0 - critical, abs=1e-3)

    # Turning depths of rays through the axis, from the published closed form c(z) = 1500 / cos(angle).
    @pytest.mark.parametrize(
        ("upper", "angle"),
        [(1172.175233, 1.0), (1052.408118, 2.0), (463.809183, 8.0), (304.6050135, 10.0), (24.45797892, 14.0)],
        ids=["munk.zu.1", "munk.zu.2", "munk.zu.8", "munk.zu.10", "munk.zu.14"],
    )
    def test_conjugate_depths(self, upper, angle):
        lower = brentq(lambda z: munk(z) - 1500.0 / np.cos(np.radians(angle)), 1300.0, 5000.0, xtol=1e-10)
        profile = munk_profile()
        assert profile.conjugate_depth(lower) == pytest.approx(upper, abs=0.01)
        assert profile.conjugate_depth(upper) == pytest.approx(lower, abs=0.01)

    def test_conjugate_depth_of_the_deepest_level(self):
        features = munk_profile(bottom=4000.0).features()
        assert features.conjugate_depth == pytest.approx(brentq(lambda z: munk(z) - munk(4000.0), 0, 1300), abs=1e-3)
        assert features.critical_depth is None
        assert any("no critical depth down to 4000 m" in note for note in features.notes)

    def test_no_conjugate_depth_below_faster_water(self):
        features = munk_profile().features()
        assert features.conjugate_depth is None
        assert any("no conjugate depth" in note for note in features.notes)
        assert munk_profile().conjugate_depth(4999.0) is None
        assert munk_profile().conjugate_depth(1300.0) == 1300.0

    @pytest.mark.parametrize("seed", range(5))
    def test_noise_of_1_cm_per_s_makes_no_ducts(self, seed):
        smooth = munk_profile(step=2.0)
        noise = np.random.default_rng(seed).normal(0.0, 0.01, len(smooth))
        noisy = Profile(smooth.depth, smooth.speed + noise).features(seabed_depth=5000.0)
        clean = smooth.features(seabed_depth=5000.0)
        assert len(noisy.ducts) == 1
        assert noisy.sonic_layer_depth == 0.0
        assert noisy.axis_depth == pytest.approx(1300.0, abs=60.0)  # the water there is flat to 1 cm/s over 40 m
        assert noisy.critical_depth == pytest.approx(clean.critical_depth, abs=3.0)
        assert noisy.steepest_gradient == pytest.approx(clean.steepest_gradient, abs=0.02)


class TestLayers:
    layered = Profile([0.0, 80.0, 180.0, 1000.0, 4500.0], [1520.0, 1521.28, 1501.28, 1480.0, 1537.0])

    def test_isothermal_layer(self):
        features = self.layered.features()
        assert features.sonic_layer_depth == 80.0
        assert features.sonic_layer_speed == 1521.28
        assert features.in_layer_gradient == pytest.approx(0.016)
        assert features.below_layer_gradient == pytest.approx(-0.2)
        assert (features.steepest_gradient, features.steepest_gradient_depth) == (pytest.approx(-0.2), 130.0)
        assert features.critical_depth == pytest.approx(1000.0 + 3500.0 * 41.28 / 57.0)
        assert [duct.axis_depth for duct in features.ducts] == [0.0, 1000.0]
        assert features.ducts[0].bottom == 80.0
        assert features.ducts[0].strength == pytest.approx(1.28)
        assert features.ducts[1].top == 80.0
        assert features.ducts[1].bottom == features.critical_depth

    # 1.76e5 H^(-3/2) Hz, H in metres: the rule that came from 4.7e-3 in feet; 3 % covers the gradient it assumes.
    @pytest.mark.parametrize(("depth", "frequency"), [(100.0, 176.0), (200.0, 62.2254)], ids=["duct.H100", "duct.H200"])
    def test_cutoff_against_the_rule(self, depth, frequency):
        profile = Profile([0.0, depth, 2 * depth], [1500.0, 1500.0 + 0.0163 * depth, 1490.0])
        assert profile.features().duct_cutoff_frequency == pytest.approx(frequency, rel=0.03)

    def test_cutoff_against_the_airy_function(self):
        # Under a pressure-release surface the first mode of a linear k² turns at depth H when
        # (2 k² g / c)^(1/3) H is the first zero of Ai (closed form).
        depth, gradient, speed = 100.0, 0.0165, 1500.0
        zero = -ai_zeros(1)[0][0]
        exact = speed / (2.0 * np.pi) * np.sqrt((zero / depth) ** 3 * speed / (2.0 * gradient))
        profile = Profile([0.0, depth, 200.0], [speed, speed + gradient * depth, 1490.0])
        assert profile.features().duct_cutoff_frequency == pytest.approx(exact, rel=0.02)

    def test_polar_half_channel(self):
        features = Profile([0.0, 300.0, 3000.0], [1440.0, 1450.0, 1495.0]).features()
        assert features.axis_depth == 0.0
        assert features.axis_speed == 1440.0
        assert features.sonic_layer_depth is None
        assert features.duct_cutoff_frequency is None
        assert features.critical_depth is None
        assert any("grows from the surface" in note for note in features.notes)
        assert any("axis is at the surface" in note for note in features.notes)

    def test_polar_half_channel_over_a_weak_inner_minimum(self):
        features = Profile([0, 300, 500, 3000], [1440.0, 1460.0, 1459.5, 1500.0]).features()
        assert features.axis_depth == 0.0
        assert features.sonic_layer_depth == 300.0

    def test_river_water_on_top_does_not_hide_the_deep_channel(self):
        features = Profile([0, 8, 15, 900, 4000], [1462.0, 1463.0, 1499.0, 1482.0, 1525.0]).features(seabed_depth=4000)
        assert features.sonic_layer_depth == 15.0
        assert features.axis_depth == 900.0
        assert features.critical_depth == pytest.approx(900.0 + 3100.0 * 17.0 / 43.0)

    def test_a_ragged_channel_is_one_channel(self):
        # A weak deep channel below a deep winter layer, cut up by lesser maxima: the surface layer does not outdo it.
        depth = [0.0, 334.0, 500.0, 650.0, 700.0, 850.0, 900.0, 1100.0, 2000.0]
        speed = [1490.0, 1495.0, 1491.5, 1490.5, 1491.5, 1490.3, 1491.4, 1490.8, 1497.0]
        features = Profile(depth, speed).features()
        assert features.axis_depth == 850.0
        assert features.sonic_layer_depth == 334.0
        assert len(features.ducts) == 4

    def test_no_axis_where_the_speed_still_falls_at_the_deepest_level(self):
        features = Profile([0, 100, 150, 200, 1200], [1528.0, 1522.0, 1521.0, 1522.0, 1492.0]).features()
        assert features.axis_depth is None
        assert len(features.ducts) == 1

    def test_a_layer_that_was_assumed_is_no_layer(self):
        profile = Profile([0.0, 7.0, 50.0], [1540.0, 1540.116, 1530.0], surface_assumed=True)
        features = profile.features()
        assert features.sonic_layer_depth == 0.0
        assert features.ducts == ()
        assert any("first level measured (7 m)" in note for note in features.notes)
        measured = Profile(profile.depth, profile.speed).features()
        assert measured.sonic_layer_depth == 7.0

    def test_summer_shelf_has_no_channel(self):
        features = Profile([0.0, 20.0, 30.0, 90.0], [1505.0, 1504.0, 1488.0, 1486.0]).features()
        assert features.sonic_layer_depth == 0.0
        assert features.axis_depth is None
        assert features.ducts == ()
        assert features.below_layer_gradient == pytest.approx(-19.0 / 90.0)
        assert any("over 90 m only" in note for note in features.notes)
        assert any("no deep channel" in note for note in features.notes)

    def test_mixed_layer_on_the_shelf_is_a_duct_but_no_deep_channel(self):
        features = Profile([0.0, 30.0, 40.0, 90.0], [1500.0, 1500.5, 1488.0, 1486.0]).features()
        assert features.sonic_layer_depth == 30.0
        assert features.axis_depth is None
        assert len(features.ducts) == 1

    def test_uniform_water(self):
        features = Profile([0.0, 100.0], [1500.0, 1500.0]).features()
        assert features.sonic_layer_depth == 0.0
        assert features.steepest_gradient == 0.0
        assert features.axis_depth is None
        assert any("varies by less than 0.1 m/s" in note for note in features.notes)

    def test_a_rise_below_the_prominence_makes_no_layer(self):
        profile = Profile([0.0, 3.0, 10.0, 50.0], [1500.0, 1500.05, 1495.0, 1490.0])
        features = profile.features()
        assert features.sonic_layer_depth == 0.0
        assert any("at 3 m exceeds the surface speed by only 0.050 m/s" in note for note in features.notes)
        assert profile.features(prominence=0.01).sonic_layer_depth == 3.0

    def test_cast_from_below_the_surface(self):
        features = Profile([4.0, 60.0, 100.0], [1500.0, 1501.0, 1490.0]).features()
        assert features.surface_speed == 1500.0
        assert features.sonic_layer_depth == 60.0
        assert any("carried from 4 m up to the surface" in note for note in features.notes)

    def test_cast_from_too_deep_to_tell(self):
        profile = Profile([200.0, 900.0, 3000.0], [1490.0, 1480.0, 1510.0])
        features = profile.features()
        assert features.surface_speed is None
        assert features.sonic_layer_depth is None
        assert features.axis_depth == 900.0
        assert any("first level lies at 200 m" in note for note in features.notes)
        assert profile.conjugate_depth(1000.0) == pytest.approx(900.0 - 700.0 * (30.0 / 21.0) / 10.0)

    def test_seabed_above_the_deepest_level_is_noted(self):
        features = self.layered.features(seabed_depth=4400.0)
        assert features.depth_excess == pytest.approx(4400.0 - features.critical_depth)
        assert any("lies below the seabed depth given (4400 m)" in note for note in features.notes)

    def test_steepest_gradient_is_not_that_of_two_noisy_levels(self):
        depth = np.array([0.0, 10.0, 10.1, 20.0, 30.0, 60.0])
        features = Profile(depth, [1500.0, 1500.0, 1500.1, 1500.1, 1485.0, 1484.0]).features()
        assert features.steepest_gradient == pytest.approx(-1.51)
        assert features.steepest_gradient_depth == 25.0


class TestInvariants:
    @given(
        st.lists(st.floats(1420.0, 1560.0), min_size=2, max_size=30),
        st.integers(0, 2**32 - 1),
    )
    def test_extremes_alternate_and_bound_the_ducts(self, speed, seed):
        steps = np.random.default_rng(seed).uniform(0.5, 100.0, len(speed))
        profile = Profile(np.cumsum(steps) - steps[0], speed)
        features = profile.features()
        previous = 0.0
        for duct in features.ducts:
            assert duct.top <= duct.axis_depth < duct.bottom
            assert duct.strength >= 0.1 - 1e-9
            assert duct.axis_depth >= previous
            previous = duct.axis_depth
            inner = np.linspace(duct.top, duct.bottom, 50)[1:-1]
            assert np.all(profile.at(inner) <= duct.edge_speed + 1e-9)
        if features.sonic_layer_depth is not None:
            assert profile.at(features.sonic_layer_depth) == features.sonic_layer_speed
            above = profile.speed[profile.depth <= features.sonic_layer_depth]
            assert features.sonic_layer_speed >= above.max() - 0.1
        if features.critical_depth is not None:
            above = profile.speed[profile.depth <= features.axis_depth].max()
            assert profile.at(features.critical_depth) == pytest.approx(above, abs=1e-9)

    @given(st.lists(st.floats(1480.0, 1520.0), min_size=2, max_size=40))
    def test_steepest_gradient_equals_a_brute_search(self, speed):
        profile = Profile(np.arange(len(speed)) * 1.7, speed)
        window = min(5.0, float(profile.depth[-1]))
        tops = np.linspace(0.0, profile.depth[-1] - window, 2001)
        brute = np.abs((profile.at(np.minimum(tops + window, profile.depth[-1])) - profile.at(tops)) / window).max()
        found = abs(profile.features().steepest_gradient)
        assert brute - 1e-9 <= found <= brute + 0.02 * np.ptp(speed) + 1e-9

    def test_splitting_layers_changes_no_feature(self):
        profile = TestLayers.layered
        depth = np.union1d(profile.depth, np.arange(0.0, 4500.0, 37.0))
        split = Profile(depth, profile.at(depth)).features(seabed_depth=4600.0).to_dict()
        whole = profile.features(seabed_depth=4600.0).to_dict()
        for name in ("sonic_layer_depth", "axis_depth", "critical_depth", "depth_excess", "duct_cutoff_frequency"):
            assert split[name] == pytest.approx(whole[name], rel=1e-12)


class TestValue:
    def test_to_dict_is_json(self):
        plain = munk_profile(step=100.0).features().to_dict()
        assert json.loads(json.dumps(plain)) == plain
        assert plain["ducts"][0]["strength"] > 40.0

    def test_lines_hold_every_feature_that_exists_and_the_notes(self):
        features = TestLayers.layered.features(seabed_depth=4600.0)
        text = "\n".join(features.lines())
        assert "sonic layer depth                            80.0 m" in text
        assert "low-frequency cutoff of the surface duct" in text
        assert "duct 2" in text
        existing = [name for name, value in features.to_dict().items() if isinstance(value, float)]
        plain = [line for line in features.lines() if not line.startswith("duct ") and line not in features.notes]
        assert len(plain) == len(existing) - 1  # all numbers but the prominence
        assert set(features.notes) <= set(features.lines())

    def test_to_dataset_has_units_on_every_variable(self):
        dataset = munk_profile(step=100.0).features().to_dataset()
        assert all({"units", "long_name"} <= set(dataset[name].attrs) for name in dataset.data_vars)
        assert float(dataset["axis_depth"]) == 1300.0
        assert np.isnan(dataset["depth_excess"])
        assert dict(dataset.sizes) == {"duct": 1}
        assert dataset.attrs["cast_id"] == "munk"

    @pytest.mark.parametrize(
        ("options", "message"),
        [
            ({"seabed_depth": -5.0}, "seabed_depth is -5 m; a finite depth above 0 m"),
            ({"seabed_depth": np.nan}, "seabed_depth is nan m"),
            ({"prominence": 0.0}, "prominence is 0 m/s; a finite number above 0 m/s"),
        ],
    )
    def test_refusals(self, options, message):
        with pytest.raises(InputError, match=message):
            TestLayers.layered.features(**options)
