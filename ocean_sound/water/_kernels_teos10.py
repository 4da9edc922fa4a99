"""TEOS-10 on thousands of levels in one go.

Each formula is evaluated in the order of operations of the GSW toolbox, whose C library gives these numbers everywhere
else: so the two agree to the last bit where no compiler fuses a multiplication with an addition. What makes the loops
fast is that the compiler works on several levels at once.

The polynomials are those of IAPWS-08 (Feistel 2008) for potential and Conservative Temperature and of Roquet, Madec,
McDougall and Barker (2015), Ocean Modelling 90, 29-43, for the specific volume, as the toolbox writes them down:
Copyright (c) 2011, SCOR/IAPSO WG127; copyright 2017-2020 Eric Firing and contributors. Its licence stands at the end
of LICENSE.
"""

# mypy: ignore-errors

from __future__ import annotations

import math

import numpy as np

from .._numba import kernel

_STANDARD = 35.16504  # g/kg, Absolute Salinity of the standard ocean
_RATIO = _STANDARD / 35.0  # g/kg, Reference Salinity per practical salinity
_BALTIC = 0.087  # g/kg, what fresh water in the Baltic holds
_BALTIC_RATIO = (_STANDARD - _BALTIC) / 35.0
_SALT_SCALE = 0.0248826675584615  # kg/g, 1 / (40 g/kg * 35.16504 / 35)
_SALT_OFFSET = 5.971840214030754e-1  # 24 times that
_HEAT = 3991.86795711963  # J/(kg K), of Conservative Temperature
_KELVIN = 273.15
_PASCAL = 1.0e4  # per dbar
_RADIAN = 3.141592653589793 / 180.0
_GRAVITY_GROWTH = 2.26e-7  # 1/m


@kernel
def absolute_salinities(salinity, pressure, starts, levels, anomaly, fresh, found):
    """Absolute Salinity (g/kg) of the levels of many casts, into `found`.

    Parameters
    ----------
    salinity, pressure, found : float64, shape (levels of all casts,)
        Practical salinity; dbar.
    starts : int64, shape (casts + 1,)
        The first level of each cast, and the end of the last.
    levels : float64, shape (pressures of the atlas,)
        dbar, growing.
    anomaly : float64, shape (casts, pressures of the atlas)
        Anomaly ratio of the salinity at each cast's place, by the atlas; between its pressures it is a straight line.
    fresh : float64, shape (casts,)
        Absolute Salinity of fresh water there: 0, more in the Baltic, NaN where no place or no atlas is known.
    """
    last = levels.size - 2
    for cast in range(fresh.size):
        first, end = starts[cast], starts[cast + 1]
        if np.isnan(fresh[cast]):
            for row in range(first, end):
                found[row] = salinity[row] * _RATIO
        elif fresh[cast] > 0.0:
            for row in range(first, end):
                found[row] = _BALTIC_RATIO * salinity[row] + _BALTIC
        else:
            at = 0
            for row in range(first, end):
                p = min(pressure[row], levels[last + 1])
                while at < last and p >= levels[at + 1]:
                    at += 1
                while at > 0 and p < levels[at]:
                    at -= 1
                upper = anomaly[cast, at]
                share = (p - levels[at]) / (levels[at + 1] - levels[at])
                ratio = upper + share * (anomaly[cast, at + 1] - upper)
                found[row] = _RATIO * salinity[row] * (1.0 + ratio)


@kernel
def conservative_temperatures(absolute, temperature, pressure, found):
    """Conservative Temperature (degC), into `found`, from Absolute Salinity (g/kg), temperature (degC) and dbar.

    Potential temperature is where the entropy at the surface is that of the water in place: two steps of Newton's
    method, each with the slope at its middle (McDougall and Wotherspoon 2014).
    """
    # fmt: off
    for row in range(found.size):
        sa, t, p = absolute[row], temperature[row], pressure[row]
        x2 = _SALT_SCALE * sa
        x = math.sqrt(x2)
        z = p * 1e-4
        y = t * 0.025
        pure = (
            z * (-270.983805184062 + z * (776.153611613101 + z * (-196.51255088122 + (28.9796526294175 -
            2.13290083518327 * z) * z))) + y * (-24715.571866078 + z * (2910.0729080936 + z *
            (-1513.116771538718 + z * (546.959324647056 + z * (-111.1208127634436 + 8.68841343834394 *
            z)))) + y * (2210.2236124548363 + z * (-2017.52334943521 + z * (1498.081172457456 + z *
            (-718.6359919632359 + (146.4037555781616 - 4.9892131862671505 * z) * z))) + y *
            (-592.743745734632 + z * (1591.873781627888 + z * (-1207.261522487504 + (608.785486935364 -
            105.4993508931208 * z) * z)) + y * (290.12956292128547 + z * (-973.091553087975 + z *
            (602.603274510125 + z * (-276.361526170076 + 32.40953340386105 * z))) + y *
            (-113.90630790850321 + y * (21.35571525415769 - 67.41756835751434 * z) + z *
            (381.06836198507096 + z * (-133.7383902842754 + 49.023632509086724 * z)))))))
        )
        saline = (
            x2 * (z * (729.116529735046 + z * (-343.956902961561 + z * (124.687671116248 + z *
            (-31.656964386073 + 7.04658803315449 * z)))) + x * (x * (y * (-137.1145018408982 + y *
            (148.10030845687618 + y * (-68.5590309679152 + 12.4848504784754 * y))) - 22.6683558512829 * z)
            + z * (-175.292041186547 + (83.1923927801819 - 29.483064349429 * z) * z) + y *
            (-86.1329351956084 + z * (766.116132004952 + z * (-108.3834525034224 + 51.2796974779828 * z))
            + y * (-30.0682112585625 - 1380.9597954037708 * z + y * (3.50240264723578 + 938.26075044542 *
            z)))) + y * (1760.062705994408 + y * (-675.802947790203 + y * (365.7041791005036 + y *
            (-108.30162043765552 + 12.78101825083098 * y) + z * (-1190.914967948748 + (298.904564555024 -
            145.9491676006352 * z) * z)) + z * (2082.7344423998043 + z * (-614.668925894709 +
            (340.685093521782 - 33.3848202979239 * z) * z))) + z * (-1721.528607567954 + z *
            (674.819060538734 + z * (-356.629112415276 + (88.4080716616 - 15.84003094423364 * z) * z)))))
        )
        entropy = -(pure + saline) * 0.025
        s1 = sa / _RATIO
        theta = t + p * (8.65483913395442e-6 - s1 * 1.41636299744881e-6 - p * 7.38286467135737e-9 + t * (
            -8.38241357039698e-6 + s1 * 2.83933368585534e-8 + t * 1.77803965218656e-8 + p * 1.71155619208233e-10))
        slope = _HEAT / ((_KELVIN + theta) * (1.0 - 0.05 * (1.0 - sa / _STANDARD)))
        for _ in range(2):
            before = theta
            y = before * 0.025
            pure = (
                y * (-24715.571866078 + y * (2210.2236124548363 + y * (-592.743745734632 + y *
                (290.12956292128547 + y * (-113.90630790850321 + y * 21.35571525415769)))))
            )
            saline = (
                x2 * (x * (x * (y * (-137.1145018408982 + y * (148.10030845687618 + y *
                (-68.5590309679152 + 12.4848504784754 * y)))) + y * (-86.1329351956084 + y *
                (-30.0682112585625 + y * 3.50240264723578))) + y * (1760.062705994408 + y *
                (-675.802947790203 + y * (365.7041791005036 + y * (-108.30162043765552 +
                12.78101825083098 * y)))))
            )
            excess = -(pure + saline) * 0.025 - entropy
            theta = before - excess / slope
            y = 0.5 * (theta + before) * 0.025
            pure = (
                -24715.571866078 + y * (4420.4472249096725 + y * (-1778.231237203896 + y *
                (1160.5182516851419 + y * (-569.531539542516 + y * 128.13429152494615))))
            )
            saline = (
                x2 * (1760.062705994408 + x * (-86.1329351956084 + x * (-137.1145018408982 + y *
                (296.20061691375236 + y * (-205.67709290374563 + 49.9394019139016 * y))) + y *
                (-60.136422517125 + y * 10.50720794170734)) + y * (-1351.605895580406 + y *
                (1097.1125373015109 + y * (-433.20648175062206 + 63.905091254154904 * y))))
            )
            slope = -((pure + saline) * 0.000625)
            theta = before - excess / slope
        y = theta * 0.025
        enthalpy = (
            61.01362420681071 + y * (168776.46138048015 + y * (-2735.2785605119625 + y *
            (2574.2164453821433 + y * (-1536.6644434977543 + y * (545.7340497931629 + (-50.91091728474331
            - 18.30489878927802 * y) * y))))) + x2 * (268.5520265845071 + y * (-12019.028203559312 + y *
            (3734.858026725145 + y * (-2046.7671145057618 + y * (465.28655623826234 + (-0.6370820302376359
            - 10.650848542359153 * y) * y)))) + x * (937.2099110620707 + y * (588.1802812170108 + y *
            (248.39476522971285 + (-3.871557904936333 - 2.6268019854268356 * y) * y)) + x *
            (-1687.914374187449 + x * (246.9598888781377 + x * (123.59576582457964 - 48.5891069025409 *
            x)) + y * (936.3206544460336 + y * (-942.7827304544439 + y * (369.4389437509002 +
            (-33.83664947895248 - 9.987880382780322 * y) * y))))))
        )
        found[row] = enthalpy / _HEAT
    # fmt: on


@kernel
def volumes_and_speeds(absolute, conservative, pressure, volume, speed):
    """Specific volume (m3/kg) and speed of sound (m/s) from Absolute Salinity, Conservative Temperature and dbar.

    The speed is v / sqrt(-dv/dp), dv/dp at constant entropy and composition.
    """
    # fmt: off
    for row in range(volume.size):
        xs = math.sqrt(_SALT_SCALE * absolute[row] + _SALT_OFFSET)
        ys = conservative[row] * 0.025
        z = pressure[row] * 1e-4
        v = (
            1.0769995862e-3 + xs * (-3.1038981976e-4 + xs * (6.6928067038e-4 + xs * (-8.5047933937e-4 + xs
            * (5.8086069943e-4 + xs * (-2.1092370507e-4 + 3.1932457305e-5 * xs))))) + ys *
            (-1.5649734675e-5 + xs * (3.5009599764e-5 + xs * (-4.3592678561e-5 + xs * (3.4532461828e-5 +
            xs * (-1.1959409788e-5 + 1.3864594581e-6 * xs)))) + ys * (2.7762106484e-5 + xs *
            (-3.7435842344e-5 + xs * (3.5907822760e-5 + xs * (-1.8698584187e-5 + 3.8595339244e-6 * xs))) +
            ys * (-1.6521159259e-5 + xs * (2.4141479483e-5 + xs * (-1.4353633048e-5 + 2.2863324556e-6 *
            xs)) + ys * (6.9111322702e-6 + xs * (-8.7595873154e-6 + 4.3703680598e-6 * xs) + ys *
            (-8.0539615540e-7 + -3.3052758900e-7 * xs + 2.0543094268e-7 * ys))))) + z * (-6.0799143809e-5
            + xs * (2.4262468747e-5 + xs * (-3.4792460974e-5 + xs * (3.7470777305e-5 + xs *
            (-1.7322218612e-5 + 3.0927427253e-6 * xs)))) + ys * (1.8505765429e-5 + xs * (-9.5677088156e-6
            + xs * (1.1100834765e-5 + xs * (-9.8447117844e-6 + 2.5909225260e-6 * xs))) + ys *
            (-1.1716606853e-5 + xs * (-2.3678308361e-7 + xs * (2.9283346295e-6 + -4.8826139200e-7 * xs)) +
            ys * (7.9279656173e-6 + xs * (-3.4558773655e-6 + 3.1655306078e-7 * xs) + ys *
            (-3.4102187482e-6 + 1.2956717783e-6 * xs + 5.0736766814e-7 * ys)))) + z * (9.9856169219e-6 +
            xs * (-5.8484432984e-7 + xs * (-4.8122251597e-6 + xs * (4.9263106998e-6 + -1.7811974727e-6 *
            xs))) + ys * (-1.1736386731e-6 + xs * (-5.5699154557e-6 + xs * (5.4620748834e-6 +
            -1.3544185627e-6 * xs)) + ys * (2.1305028740e-6 + xs * (3.9137387080e-7 + -6.5731104067e-7 *
            xs) + ys * (-4.6132540037e-7 + 7.7618888092e-9 * xs + -6.3352916514e-8 * ys))) + z *
            (-1.1309361437e-6 + xs * (3.6310188515e-7 + 1.6746303780e-8 * xs) + ys * (-3.6527006553e-7 +
            -2.7295696237e-7 * xs + 2.8695905159e-7 * ys) + z * (1.0531153080e-7 + -1.1147125423e-7 * xs +
            3.1454099902e-7 * ys + z * (-1.2647261286e-8 + 1.9613503930e-9 * z)))))
        )
        by_z = (
            -6.07991438090e-5 + xs * (2.42624687470e-5 + xs * (-3.47924609740e-5 + xs * (3.74707773050e-5
            + xs * (-1.73222186120e-5 + 3.09274272530e-6 * xs)))) + ys * (1.85057654290e-5 + xs *
            (-9.56770881560e-6 + xs * (1.11008347650e-5 + xs * (-9.84471178440e-6 + 2.59092252600e-6 *
            xs))) + ys * (-1.17166068530e-5 + xs * (-2.36783083610e-7 + xs * (2.92833462950e-6 +
            -4.88261392000e-7 * xs)) + ys * (7.92796561730e-6 + xs * (-3.45587736550e-6 + 3.16553060780e-7
            * xs) + ys * (-3.41021874820e-6 + 1.29567177830e-6 * xs + 5.07367668140e-7 * ys)))) + z *
            (1.99712338438e-5 + xs * (-1.16968865968e-6 + xs * (-9.62445031940e-6 + xs * (9.85262139960e-6
            + -3.56239494540e-6 * xs))) + ys * (-2.34727734620e-6 + xs * (-1.11398309114e-5 + xs *
            (1.09241497668e-5 + -2.70883712540e-6 * xs)) + ys * (4.26100574800e-6 + xs * (7.82747741600e-7
            + -1.31462208134e-6 * xs) + ys * (-9.22650800740e-7 + 1.55237776184e-8 * xs +
            -1.26705833028e-7 * ys))) + z * (-3.39280843110e-6 + xs * (1.08930565545e-6 + 5.02389113400e-8
            * xs) + ys * (-1.09581019659e-6 + -8.18870887110e-7 * xs + 8.60877154770e-7 * ys) + z *
            (4.21246123200e-7 + -4.45885016920e-7 * xs + 1.25816399608e-6 * ys + z * (-6.32363064300e-8 +
            1.17681023580e-8 * z))))
        )
        volume[row] = v
        speed[row] = 10000.0 * math.sqrt(-v * v / by_z)
    # fmt: on


@kernel
def depths(pressure, volume, starts, latitude, found):
    """Depth (m) of each level of many casts, into `found`, by integrating their specific volume from the surface down.

    The anomaly from the standard ocean is integrated by the trapezium rule; the water above the first level is like
    it. A gap takes the anomaly of the level before, else the first of its cast, else none.

    Parameters
    ----------
    pressure, volume, found : float64, shape (levels of all casts,)
        dbar, m3/kg.
    starts : int64, shape (casts + 1,)
    latitude : float64, shape (casts,)
        Degrees.
    """
    for cast in range(latitude.size):
        first, end = starts[cast], starts[cast + 1]
        anomaly_before, level_before = 0.0, 0.0
        for row in range(first, end):
            anomaly = volume[row] - _standard_volume(pressure[row])
            if math.isfinite(anomaly):
                anomaly_before = anomaly
                break
        sine = math.sin(latitude[cast] * _RADIAN)
        square = sine * sine
        gravity = 9.780327 * (1.0 + (5.2792e-3 + (2.32e-5 * square)) * square)
        growth = -0.5 * _GRAVITY_GROWTH * gravity
        total = 0.0
        for row in range(first, end):
            p = pressure[row]
            anomaly = volume[row] - _standard_volume(p)
            if not math.isfinite(anomaly):
                anomaly = anomaly_before
            total += 0.5 * (anomaly + anomaly_before) * (p - level_before) * _PASCAL
            anomaly_before, level_before = anomaly, p
            potential = _standard_enthalpy(p) - (0.0 - total)
            root = math.sqrt(gravity * gravity - 4.0 * growth * potential)
            found[row] = 0.0 - -2.0 * potential / (gravity + root)


@kernel
def _standard_volume(pressure):
    """Specific volume (m3/kg) of the standard ocean: 35.16504 g/kg at 0 degC."""
    z = pressure * 1.0e-4
    # fmt: off
    return (
        9.726613854843870e-04 + z * (-4.505913211160929e-05 + z * (7.130728965927127e-06 + z *
        (-6.657179479768312e-07 + z * (-2.994054447232880e-08 + z * (-1.2647261286e-8 + 1.9613503930e-9 *
        z)))))
    )
    # fmt: on


@kernel
def _standard_enthalpy(pressure):
    """Enthalpy (J/kg) of the standard ocean less that at the surface."""
    z = pressure * 1.0e-4
    # fmt: off
    return (
        z * (9.726613854843870e-4 + z * (-2.252956605630465e-5 + z * (2.376909655387404e-6 + z *
        (-1.664294869986011e-7 + z * (-5.988108894465758e-9 + z * (-2.10787688100e-9 + 2.80192913290e-10 *
        z))))))
    ) * _PASCAL * 1.0e4
    # fmt: on
