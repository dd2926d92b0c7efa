"""The VoIP metrics block of RTCP extended reports (RFC 3611 section 4.7): voice quality as the far receiver has it."""

import struct
from dataclasses import dataclass

from rtpaudit.errors import MalformedPacket

NAN = float("nan")
OCTETS = 32
UNAVAILABLE = 127
"""Of levels, ratings and scores."""


@dataclass(frozen=True, slots=True)
class VoipMetrics:
    """VoIP metrics report block (section 4.7): numbers as they came, and properties in units, NaN where unavailable."""

    ssrc: int
    loss_rate: int
    discard_rate: int
    burst_density: int
    gap_density: int
    """these four in 1/256"""
    burst_duration_ms: int
    gap_duration_ms: int
    round_trip_delay: int
    end_system_delay: int
    """these two in ms, 0 where unknown"""
    signal_level: int
    noise_level: int
    """these two in dBm0, signed"""
    echo_return_loss: int
    gmin: int
    r: int
    external_r: int
    mos_lq_tenths: int
    mos_cq_tenths: int
    configuration: int
    playout_nominal_ms: int
    playout_maximum_ms: int
    playout_most_ms: int

    @property
    def loss_pct(self) -> float:
        """Lost since the beginning of reception (4.7.1). [%]"""
        return _percent(self.loss_rate)

    @property
    def discard_pct(self) -> float:
        """Discarded by the playout buffer since then (4.7.1). [%]"""
        return _percent(self.discard_rate)

    @property
    def burst_density_pct(self) -> float:
        """Lost or discarded within bursts (4.7.2). [%]"""
        return _percent(self.burst_density)

    @property
    def gap_density_pct(self) -> float:
        """Lost or discarded within gaps (4.7.2). [%]"""
        return _percent(self.gap_density)

    @property
    def round_trip_ms(self) -> float:
        """Between the RTP interfaces (4.7.3). [ms]"""
        return float(self.round_trip_delay) if self.round_trip_delay else NAN

    @property
    def end_system_delay_ms(self) -> float:
        """Within the reporter's device, sending and receiving together (4.7.3). [ms]"""
        return float(self.end_system_delay) if self.end_system_delay else NAN

    @property
    def signal_level_dbm0(self) -> float:
        """Of speech (4.7.4). [dBm0]"""
        return _available(self.signal_level)

    @property
    def noise_level_dbm0(self) -> float:
        """Of silence (4.7.4). [dBm0]"""
        return _available(self.noise_level)

    @property
    def echo_return_loss_db(self) -> float:
        """Residual: return loss and its enhancement together (4.7.4). [dB]"""
        return _available(self.echo_return_loss)

    @property
    def r_factor(self) -> float:
        """Of this session (4.7.5). [0 to 100]"""
        return _within(self.r, 0, 100)

    @property
    def external_r_factor(self) -> float:
        """Of the network beyond it (4.7.5). [0 to 100]"""
        return _within(self.external_r, 0, 100)

    @property
    def mos_lq(self) -> float:
        """Listening quality (4.7.5). [1 to 5]"""
        return _within(self.mos_lq_tenths, 10, 50) / 10.0

    @property
    def mos_cq(self) -> float:
        """Conversational quality (4.7.5). [1 to 5]"""
        return _within(self.mos_cq_tenths, 10, 50) / 10.0

    @property
    def concealment(self) -> str:
        """What fills in for lost packets (4.7.6)."""
        return ("unspecified", "silence", "enhanced", "standard")[self.configuration >> 6]

    @property
    def playout(self) -> str:
        """Kind of playout buffer (4.7.6)."""
        return ("unknown", "reserved", "fixed", "adaptive")[self.configuration >> 4 & 3]

    @property
    def playout_rate(self) -> int:
        """J: an adaptive buffer takes about 2 J packets to follow a step (4.7.6); 0 where unknown."""
        return self.configuration & 15

    @classmethod
    def parse(cls, _specific: int, content: bytes) -> "VoipMetrics":
        """Section 4.7, without the block's first four octets."""
        if len(content) < OCTETS:
            raise MalformedPacket(f"RTCP XR VoIP metrics block has {len(content)} octets, needs {OCTETS}")
        return cls(*struct.unpack_from("!I4B4H2b7BxHHH", content))


def _percent(rate: int) -> float:
    return rate * 100.0 / 256.0


def _available(level: int) -> float:
    return NAN if level == UNAVAILABLE else float(level)


def _within(value: int, least: int, most: int) -> float:
    """NaN for 127, and for what must be ignored (4.7.5)."""
    return float(value) if least <= value <= most else NAN
