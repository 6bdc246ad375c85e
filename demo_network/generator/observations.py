"""What the instruments report: the true air, realistic errors, and a few planted faults."""

import numpy as np

from generator.air import saturation_vapour_pressure
from generator.setting import DAYS, HOURS, START, random_numbers

EPOCHS = 96 * DAYS  # of 15 minutes
WHITE = (2.0, 3.0)  # lowest and highest white noise of a station's delay [mm]
SLOW = (3.0, 4.0)  # slowly changing error of a station [mm]
SLOW_LASTS = 4.0  # [hour]
COMMON, COMMON_LASTS = 2.0, 24.0  # error that all stations share [mm], [hour]
FORMAL = (1.6, 2.6)  # what the files claim, optimistic as such claims are [mm]

MISSING_FIRST_DAY = "ULVE00XQV"
OUTAGES = [  # station, first and last hour
    ("CRAV00XQV", 10, 16),
    ("XAND00XQV", 30, 35),
    ("XAND00XQV", 52, 53),
    ("KELB00XQV", 44, 58),
    ("JASP00XQV", 5, 9),
    ("FULG00XQV", 60, 72),
    ("VORQ00XQV", 70, 72),
    ("MIRQ00XQV", 26, 38),
    ("DREL00XQV", 49, 50),
]
MARKED_MISSING = ("PELV00XQV", 20, 23)  # written as -999 where other outages leave lines out
GROSS = "QUAR00XQV"
GROSS_SHARE = 0.03
GROSS_SIZE = (60, 400)  # [mm]
IMPOSSIBLE = [(33.5, 9900.0), (57.25, -1000.0)]  # hour, value [mm]
WRONG_HEIGHT, HEIGHT_ERROR = "RUSQ00XQV", 82.0  # listed too high by this [m]
SILENT_SENSOR = ("GWEM00XQV", 37, 43)


def delays(sites, true_ztd):
    """Reported delays and formal errors [mm] (epoch, site), and the epochs of gross errors.

    NaN where nothing is reported.
    """
    random = random_numbers("delays")
    ztd = 1000 * true_ztd[:EPOCHS] + _delay_error(len(sites.identifier), random)
    formal = random.uniform(*FORMAL, ztd.shape[1]) * np.exp(
        0.12 * random.standard_normal(ztd.shape)
    )
    gross = _plant_gross_errors(ztd, formal, sites.identifier.index(GROSS), random)
    for station, first, last in [(MISSING_FIRST_DAY, 0, 24), *OUTAGES, MARKED_MISSING]:
        ztd[_epochs(first, last), sites.identifier.index(station)] = np.nan
    return ztd, formal, gross


def weather_reports(sensors, air_at_sensor):
    """Reported pressure [hPa], temperature [degree C] and relative humidity [%], and pressure bias.

    The reports are (moment, sensor, quantity), NaN where a sensor is silent.
    """
    random = random_numbers("weather reports")
    shape = air_at_sensor["pressure"].shape
    bias = random.normal(0, 0.2, shape[1])
    pressure = air_at_sensor["pressure"] + bias + random.normal(0, 0.1, shape)
    saturation = saturation_vapour_pressure(air_at_sensor["temperature"])
    humidity = 100 * air_at_sensor["vapour_pressure"] / saturation + random.normal(0, 2, shape)
    temperature = (
        air_at_sensor["temperature"]
        - 273.15
        + random.normal(0, 0.3, shape[1])
        + random.normal(0, 0.2, shape)
    )
    reports = np.stack([pressure, temperature, np.clip(humidity, 3, 100)], axis=-1)
    station, first, last = SILENT_SENSOR
    moments = np.linspace(0, HOURS, shape[0])
    reports[(moments >= first) & (moments < last), sensors.identifier.index(station)] = np.nan
    return reports, bias


def listed_height_error(sites):
    """What each receiver's listed height is too high by [m]."""
    return np.array(
        [HEIGHT_ERROR if station == WRONG_HEIGHT else 0.0 for station in sites.identifier]
    )


def planted_faults(sites, gross, pressure_bias, sensors):
    """Everything that is wrong on purpose, for those who want to check that it is found."""
    return {
        "gross_errors": {"station": GROSS, "epochs": [_stamp(epoch / 4) for epoch in gross]},
        "wrong_height": {
            "station": WRONG_HEIGHT,
            "listed_minus_true_m": HEIGHT_ERROR,
            "where": "delays and stations.csv; the height of its weather sensor is right",
        },
        "missing_first_day": MISSING_FIRST_DAY,
        "outages": [
            {"station": station, "from": _stamp(first), "until": _stamp(last)}
            for station, first, last in OUTAGES
        ],
        "marked_missing": _interval(MARKED_MISSING),
        "silent_sensor": _interval(SILENT_SENSOR),
        "side_by_side": [sites.identifier[-1].replace("01", "00"), sites.identifier[-1]],
        "pressure_bias_hpa": dict(
            zip(sensors.identifier, pressure_bias.round(2).tolist(), strict=True)
        ),
    }


def _delay_error(stations, random):
    """White, slow and common error [mm], (epoch, station)."""
    white = random.uniform(*WHITE, stations) * random.standard_normal((EPOCHS, stations))
    slow = random.uniform(*SLOW, stations) * _slow_noise(stations, SLOW_LASTS, random)
    return white + slow + COMMON * _slow_noise(1, COMMON_LASTS, random)


def _slow_noise(series, lasts, random):
    """First-order autoregressive noise of variance 1, (epoch, series)."""
    memory = np.exp(-0.25 / lasts)
    noise = random.standard_normal((EPOCHS, series))
    noise[1:] *= np.sqrt(1 - memory**2)
    for epoch in range(1, EPOCHS):
        noise[epoch] += memory * noise[epoch - 1]
    return noise


def _plant_gross_errors(ztd, formal, station, random):
    """Add spikes and impossible values in place; every second spike has a large formal error."""
    epochs = np.sort(random.choice(EPOCHS, round(GROSS_SHARE * EPOCHS), replace=False))
    ztd[epochs, station] += random.choice([-1, 1], epochs.size) * random.uniform(
        *GROSS_SIZE, epochs.size
    )
    formal[epochs[::2], station] = random.uniform(6, 15, epochs[::2].size)
    for hour, value in IMPOSSIBLE:
        ztd[round(hour * 4), station] = value
    return sorted({*epochs.tolist(), *(round(hour * 4) for hour, _ in IMPOSSIBLE)})


def _epochs(first, last):
    """Epochs after hour `first`, up to and including hour `last`."""
    return slice(round(first * 4) + 1 if first else 0, round(last * 4) + 1)


def _stamp(hour):
    """UTC time of an hour from the start."""
    return str(START + np.timedelta64(round(hour * 60), "m"))


def _interval(station_first_last):
    """A station's interval in words."""
    station, first, last = station_first_last
    return {"station": station, "from": _stamp(first), "until": _stamp(last)}
