"""Misprints in circulation, each shown to be one that our tests would catch; see the errata in values.json."""

from __future__ import annotations

import numpy as np
import pytest

from ocean_sound.water import del_grosso, equations, unesco
from ocean_sound.water.belogolskii import _ROWS
from ocean_sound.water.bilaniuk_wong import COEFFICIENTS
from ocean_sound.water.mackenzie import mackenzie
from ocean_sound.water.marczak import _TEMPERATURE
from ocean_sound.water.medwin import medwin


def spread(set_68, set_90):
    s, t, p = np.meshgrid(np.linspace(30, 40, 11), np.linspace(0, 30, 16), np.linspace(0, 9806.65, 26), indexing="ij")
    return np.abs(del_grosso._nrl2(set_90, t, s, p) - del_grosso._nrl2(set_68, 1.00024 * t, s, p)).max()


def test_both_sets_of_del_grosso_agree_only_without_misprints():
    right, form90 = del_grosso._IPTS68, del_grosso._ITS90
    assert spread(right, form90) < 0.001
    lost_eight = right._replace(pressure=(*right.pressure[:3], -0.83392332513e-8))
    wrong_digit = right._replace(salinity=(0.0, right.salinity[1], 1.98955756844e-4))
    assert spread(lost_eight, form90) > 0.4
    assert spread(wrong_digit, form90) > 0.08


def test_mackenzie_is_the_printed_form():
    """Both known bad copies miss the check value 1550.744 or its neighbours in salinity."""
    assert mackenzie(25.0, 35.0, 1000.0) == pytest.approx(1550.744, abs=5e-4)
    assert mackenzie(25.0, 36.0, 0.0) - mackenzie(25.0, 35.0, 0.0) == pytest.approx(1.340 - 1.025e-2 * 25.0, abs=1e-9)
    assert mackenzie(0.0, 35.0, 0.0) == 1448.96


def test_medwin_is_the_printed_form():
    assert medwin(20.0, 35.0, 0.0) == pytest.approx(1449.2 + 92.0 - 22.0 + 2.32, abs=1e-9)


def test_millero_li_square_of_pressure():
    """Last coefficient -2.59e-8: at 2 degC and 400 bar the correction is 0.5116 m/s by hand."""
    by_hand = 0.002518 * 400 + (-4.76e-6 + 6.94e-7 - 1.036e-7) * 400**2 + 2.68e-9 * 400**3
    correction = unesco.unesco_ipts68(2.0, 35.0, 4000.0) - unesco.unesco_millero_li(2.0, 35.0, 4000.0)
    assert correction == pytest.approx(by_hand, abs=1e-9)


@pytest.mark.parametrize(("ours", "theirs"), [("_IPTS68", "UNESCO44_IPTS68"), ("_ITS90", "WongZhu_UNESCO_ITS90")])
def test_unesco_coefficients(coefficients, ours, theirs):
    mine, printed = getattr(unesco, ours), coefficients[theirs]
    assert [list(row) for row in mine.water] == printed["C"]
    assert [list(row) for row in mine.linear] == printed["A"]
    assert [list(row) for row in mine.root] == printed["B"]
    assert list(mine.square) == printed["D"]


@pytest.mark.parametrize(
    ("ours", "theirs"), [("_IPTS68", "DelGrosso1974_IPTS68"), ("_ITS90", "WongZhu_DelGrosso_ITS90")]
)
def test_del_grosso_coefficients(coefficients, ours, theirs):
    mine, printed = getattr(del_grosso, ours), coefficients[theirs]
    powers = {"C000": mine.temperature[0]}
    powers |= {f"T{i}": mine.temperature[i] for i in (1, 2, 3)}
    powers |= {f"S{i}": mine.salinity[i] for i in (1, 2)}
    powers |= {f"P{i}": mine.pressure[i] for i in (1, 2, 3)}
    mixed = {name.upper(): getattr(mine, name) for name in mine._fields[3:]}
    assert powers | mixed == printed


def test_pure_water_coefficients(coefficients):
    for points in (112, 148, 36):
        assert list(COEFFICIENTS[points]) == coefficients[f"BilaniukWong{points}_ITS90"]
    assert list(_TEMPERATURE) == coefficients["Marczak1997_ITS90"]
    assert [list(row) for row in _ROWS[1:]] == coefficients["Belogolskii1999"]["M"]
    assert list(_ROWS[0]) == coefficients["Belogolskii1999"]["c_T_P0"]


def test_every_check_of_what_is_built_is_claimed(all_checks, claimed_prefixes):
    """Sections 1 to 6 are the water; each value has exactly one test that claims it."""
    for check in all_checks:
        if check.section <= 6:
            claims = [prefix for prefix in claimed_prefixes if check.id.startswith(prefix)]
            assert len(claims) == 1, (check.id, claims)


def test_the_registry_is_complete():
    assert list(equations()) == [
        "teos10", "teos10-exact", "unesco", "unesco-ipts68", "unesco-millero-li", "del-grosso", "del-grosso-ipts68",
        "mackenzie", "medwin", "coppens", "leroy", "bilaniuk-wong", "marczak", "belogolskii",
    ]  # fmt: skip
