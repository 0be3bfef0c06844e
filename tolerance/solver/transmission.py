"""What resistance, inductance, conductance and capacitance a metre make of a line."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from tolerance.arrays import ComplexArray, FloatArray

SPEED_OF_LIGHT = 299792458.0  # [m/s], exact by definition of the metre
DECIBELS = 20.0 / np.log(10.0)  # of a neper


@dataclass(frozen=True, slots=True)
class LineParameters:
    """A uniform line at one frequency [Hz]; every array has one shape, (sections,).

    resistance [ohm/m], inductance [H/m], conductance [S/m], capacitance [F/m]. Textbook: the telegrapher's equations.
    """

    frequency: float
    resistance: FloatArray
    inductance: FloatArray
    conductance: FloatArray
    capacitance: FloatArray

    @property
    def complex_impedance(self) -> ComplexArray:
        """Characteristic impedance [ohm]: sqrt((R + j omega L) / (G + j omega C))."""
        return np.asarray(np.sqrt(self._series / self._shunt))

    @property
    def impedance(self) -> FloatArray:
        """Magnitude of the characteristic impedance [ohm]."""
        return np.asarray(np.abs(self.complex_impedance))

    @property
    def propagation(self) -> ComplexArray:
        """Propagation constant [1/m]: attenuation in nepers and j times the phase in radians a metre."""
        return np.asarray(np.sqrt(self._series * self._shunt))

    @property
    def delay(self) -> FloatArray:
        """Phase delay a metre [s/m]."""
        return np.asarray(self.propagation.imag / self._omega)

    @property
    def effective_dk(self) -> FloatArray:
        """Square of the phase delay against that of light [-]; it holds the slowing by the field in the metal."""
        return np.asarray((SPEED_OF_LIGHT * self.delay) ** 2)

    @property
    def conductor_loss(self) -> FloatArray:
        """Attenuation [dB/m] by the power that the resistance takes; with the dielectric's it is the whole."""
        return np.asarray(DECIBELS * 0.5 * self.resistance / self.complex_impedance.real)

    @property
    def dielectric_loss(self) -> FloatArray:
        """Attenuation [dB/m] by the power that the conductance takes."""
        impedance = self.complex_impedance
        return np.asarray(DECIBELS * 0.5 * self.conductance * np.abs(impedance) ** 2 / impedance.real)

    def scaled(self, factor: float) -> LineParameters:
        """The same wave with its voltage times `factor` for the same current: 2 for differential, 1/2 for common."""
        return LineParameters(self.frequency, factor * self.resistance, factor * self.inductance,
                              self.conductance / factor, self.capacitance / factor)

    @property
    def _omega(self) -> float:
        return 2.0 * np.pi * self.frequency

    @property
    def _series(self) -> ComplexArray:
        return np.asarray(self.resistance + 1j * self._omega * self.inductance)

    @property
    def _shunt(self) -> ComplexArray:
        return np.asarray(self.conductance + 1j * self._omega * self.capacitance)
