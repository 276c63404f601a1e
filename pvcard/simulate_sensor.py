"""What passage, transducer and encoder make of a pressure: the measuring chain of a simulated
export.

The passage between cylinder and transducer is a damped mass of gas on a spring, a system of second
order.
Its resonance follows from the geometry by one of the acoustic formulae below.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import brentq

from pvcard.types import Floats


@dataclass(frozen=True)
class Sensor:
    """Measuring chain of one pressure channel; the defaults are a perfect one."""

    resonance: float | None = None  # Hz, first mode of the passage; None: none
    damping: float = 0.1  # of critical damping
    zero: float = 0.0  # Pa, added
    gain: float = 0.0  # relative, 0.01 reads 1 % too high
    drift: float = 0.0  # Pa gained over one turn, taken back at its end
    noise: float = 0.0  # Pa, standard deviation of each sample
    quantum: float = 0.0  # Pa, step of the converter

    def lag(self, speed: float) -> float:
        """Low-frequency lag of the passage at a speed [1/s]: ``2 zeta / omega_0``. [deg]."""
        if self.resonance is None:
            return 0.0
        return 360 * speed * 2 * self.damping / (2 * np.pi * self.resonance)


def closed_tube_frequency(length: float, speed_of_sound: float) -> float:
    """First resonance of a passage closed by a stiff transducer.

    Parameters
    ----------
    length : ()
        [m]
    speed_of_sound : ()
        Of the gas in the passage. [m/s]

    Returns
    -------
    frequency : ()
        [Hz]

    Notes
    -----
    Quarter wave, ``c / (4 L)``.

    Examples
    --------
    >>> round(closed_tube_frequency(0.15, 430.0), 1)
    716.7
    """
    return speed_of_sound / (4 * length)


def cavity_frequency(
    length: float, bore: float, cavity: float, speed_of_sound: float, *, passage_share: float = 0.0
) -> float:
    """Resonance of a passage that ends in a cavity, the passage taken as a plug of gas.

    Parameters
    ----------
    length, bore : ()
        Of the passage. [m]
    cavity : ()
        Volume in front of the transducer. [m3]
    speed_of_sound : ()
        [m/s]
    passage_share : ()
        Part of the passage volume added to the cavity; one third is the first-order correction. [-]

    Returns
    -------
    frequency : ()
        [Hz]

    Notes
    -----
    ``c / (2 pi) sqrt(A / (V L))``; good only while the passage volume is small beside the cavity.
    The exact relation is solved by `passage_frequency`.

    Examples
    --------
    >>> round(cavity_frequency(0.15, 6e-3, 2e-6, 430.0), 1)
    664.4
    """
    area = np.pi / 4 * bore**2
    volume = cavity + passage_share * area * length
    return float(speed_of_sound / (2 * np.pi) * np.sqrt(area / (volume * length)))


def passage_frequency(length: float, bore: float, cavity: float, speed_of_sound: float) -> float:
    """First resonance of a passage that ends in a cavity.

    Parameters
    ----------
    length, bore, cavity, speed_of_sound : ()
        As in `cavity_frequency`.

    Returns
    -------
    frequency : ()
        [Hz]

    Notes
    -----
    Root of ``(k L) tan(k L) = A L / V`` with ``k = 2 pi f / c``: plane waves in the passage, a
    compliant end.

    Examples
    --------
    >>> round(passage_frequency(0.15, 6e-3, 2e-6, 430.0), 1)
    499.3
    """
    ratio = np.pi / 4 * bore**2 * length / cavity
    root = brentq(lambda x: x * np.tan(x) - ratio, 1e-9, np.pi / 2 - 1e-9, xtol=1e-14)
    return float(root * speed_of_sound / (2 * np.pi * length))


def travel_lag(length: float, speed_of_sound: float, speed: float) -> float:
    """Crank angle that passes while a wave runs through the passage.

    Parameters
    ----------
    length : ()
        [m]
    speed_of_sound : ()
        [m/s]
    speed : ()
        Revolutions per second. [1/s]

    Returns
    -------
    lag : ()
        [deg]

    Examples
    --------
    >>> round(travel_lag(0.15, 430.0, 1000 / 60), 4)
    2.093
    """
    return 360 * speed * length / speed_of_sound


def passage_response(frequency: Floats | float, resonance: float, damping: float) -> Floats:
    """Complex response of a system of second order.

    Parameters
    ----------
    frequency : any shape
        [Hz]
    resonance : ()
        [Hz]
    damping : ()
        Of critical damping. [-]

    Returns
    -------
    response : same shape, complex
        [-]

    Notes
    -----
    ``1 / (1 - r^2 + 2 i zeta r)``, r the frequency over the resonance.

    Examples
    --------
    >>> abs(passage_response(0.1, 1.0, 0.0)).round(6)
    np.float64(1.010101)
    """
    ratio = np.asarray(frequency, dtype=np.float64) / resonance
    response: Floats = 1 / (1 - np.square(ratio) + 2j * damping * ratio)
    return response


def through_passage(
    pressure: Floats, sensor: Sensor, speed: float, *, shift: float = 0.0, refine: int = 4
) -> Floats:
    """One turn of a trace after the passage, moved in angle and sampled more finely.

    Parameters
    ----------
    pressure : (samples,)
        One periodic turn at even angles. [Pa]
    sensor : Sensor
    speed : ()
        [1/s]
    shift : ()
        Angle by which the trace is moved to larger angles. [deg]
    refine : samples of the result for one of the input

    Returns
    -------
    pressure : (refine * samples,)
        [Pa]

    Notes
    -----
    Order by order in the Fourier series of the turn, at mean speed; exact for a periodic trace.
    """
    spectrum = np.fft.rfft(pressure)
    orders: Floats = np.arange(spectrum.size, dtype=np.float64)
    if sensor.resonance is not None:
        spectrum = spectrum * passage_response(orders * speed, sensor.resonance, sensor.damping)
    spectrum = spectrum * np.exp(-1j * np.radians(orders * shift))
    count = refine * pressure.size
    result: Floats = np.fft.irfft(spectrum, count) * refine
    return result


def as_read(
    pressure: Floats, sensor: Sensor, part_of_turn: Floats, rng: np.random.Generator
) -> Floats:
    """What the converter writes down.

    Parameters
    ----------
    pressure : any shape
        After the passage. [Pa]
    sensor : Sensor
    part_of_turn : same shape
        Where in its turn each sample lies, 0 to 1; for the drift. [-]
    rng : np.random.Generator

    Returns
    -------
    reading : same shape
        [Pa]
    """
    reading: Floats = pressure * (1 + sensor.gain) + sensor.zero + sensor.drift * part_of_turn
    if sensor.noise:
        reading = reading + rng.normal(0.0, sensor.noise, pressure.shape)
    if sensor.quantum:
        reading = np.round(reading / sensor.quantum) * sensor.quantum
    return reading
