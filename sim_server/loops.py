"""One control loop and one control valve of the base layer."""

from __future__ import annotations

import math

from sim_server.signals import Mode


class Loop:
    """A PI loop with modes, output limits and bumpless changes.

    Parameters
    ----------
    tag : str
        Name of the loop.
    gain : float
        Change of the output per unit of error [% per PV unit]; negative when a
        rising output lowers the PV.
    reset_s : float
        Integral time [s].
    setpoint : float
        First setpoint [PV unit].
    output : float
        First output [%].
    mode : Mode
        First mode.
    modes : frozenset of Mode
        Modes a person may choose.
    filter_s : float
        Time constant of the filter on the PV, ahead of the controller [s].
    """

    def __init__(
        self,
        tag: str,
        gain: float,
        reset_s: float,
        setpoint: float,
        output: float,
        mode: Mode = Mode.AUTOMATIC,
        modes: frozenset[Mode] = frozenset((Mode.MANUAL, Mode.AUTOMATIC)),
        filter_s: float = 0.0,
    ) -> None:
        self.tag = tag
        self.setpoint = setpoint
        self.output = output
        self.mode = mode
        self.modes = modes
        self._gain = gain
        self._reset_s = reset_s
        self._integral = output
        self._keep = math.exp(-1.0 / filter_s) if filter_s > 0.0 else 0.0
        self._filtered: float | None = None

    @property
    def manual(self) -> bool:
        return self.mode is Mode.MANUAL

    @property
    def filtered(self) -> float:
        """The PV behind the filter; the setpoint before the first scan."""
        return self.setpoint if self._filtered is None else self._filtered

    def scan(self, pv: float, hold_high: bool = False, hold_low: bool = False) -> float:
        """One scan per plant second.

        Parameters
        ----------
        pv : float
            The measured value.
        hold_high, hold_low : bool
            The slave cannot go further up or down: do not wind up against it.

        Returns
        -------
        float
            The output [%].
        """
        before = pv if self._filtered is None else self._filtered
        self._filtered = self._keep * before + (1.0 - self._keep) * pv
        proportional = self._gain * (self.setpoint - self._filtered)
        if self.manual:
            # Follow, so that the return to automatic starts from this output.
            self._integral = self.output - proportional
            return self.output
        change = proportional / self._reset_s
        if not ((hold_high and change > 0.0) or (hold_low and change < 0.0)):
            self._integral += change
        wanted = proportional + self._integral
        self.output = min(100.0, max(0.0, wanted))
        if self.output != wanted:
            self._integral = self.output - proportional
        return self.output

    def follow(self, output: float) -> None:
        """Let the output follow a slave that does not listen, ready for a bumpless return."""
        self.output = output
        self._integral = output - self._gain * (self.setpoint - self.filtered)


class Valve:
    """A control valve with a lag, sticking a little, and an end stop.

    Parameters
    ----------
    full_flow : float
        Flow at full opening, linear in the position [kg/h].
    position : float
        First position [%].
    stiction : float
        The stem moves only when the demand is further away than this [%].
    stroke_s : float
        Time constant of the actuator [s].
    """

    def __init__(
        self, full_flow: float, position: float, stiction: float = 0.0, stroke_s: float = 4.0
    ) -> None:
        self._full_flow = full_flow
        self._position = position
        self._demand = position
        self._stiction = stiction
        self._keep = math.exp(-1.0 / stroke_s)
        self.high = 100.0
        """End stop [%]."""

    @property
    def flow(self) -> float:
        """Flow through the valve [kg/h]."""
        return self._full_flow * self._position / 100.0

    def move(self, output: float) -> None:
        """One plant second with this controller output [%]."""
        if abs(output - self._demand) > self._stiction:
            self._demand = output
        target = min(self._demand, self.high)
        self._position = self._keep * self._position + (1.0 - self._keep) * target
