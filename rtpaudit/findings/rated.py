"""The rating of one stream as a function of what a cause changes: loss, burstiness, delay, echo."""

import math

import numpy as np

from rtpaudit.assess.rating import codec_columns
from rtpaudit.assess.results import AssessedStream
from rtpaudit.emodel.g107 import rating
from rtpaudit.emodel.g113 import ROWS
from rtpaudit.planning import PARAMETERS
from rtpaudit.profile import Profile

STAND_IN = ROWS[0]
"""Where G.113 has no values for an encoding, causes weigh as much as for G.711; no points are shown."""


class Rated:
    """One stream at the E-model."""

    def __init__(self, assessed: AssessedStream, profile: Profile) -> None:
        codec = codec_columns([assessed.stream], profile)
        self.known = not math.isnan(codec.Ie[0])
        """whether points may be shown: G.113 has values for the encoding"""
        self._Ie = float(codec.Ie[0]) if self.known else STAND_IN.Ie
        self._Bpl = float(codec.Bpl[0]) if self.known else STAND_IN.Bpl
        self._planning = profile.planning
        self.delay_ms = assessed.figures.one_way_delay_ms
        """mouth to ear"""
        self.telr_db = PARAMETERS["TELR"].default

    def R(self, loss_pct: float, burst_ratio: float, delay_ms: float = math.nan, telr_db: float = math.nan) -> float:
        """Rating for this loss; delay and echo as they were found where they are left out."""
        delay = self.delay_ms if math.isnan(delay_ms) else delay_ms
        return float(
            rating(
                self._planning,
                Ta=0.0 if math.isnan(delay) else delay,
                Ie=self._Ie,
                Bpl=self._Bpl,
                Ppl=float(np.clip(0.0 if math.isnan(loss_pct) else loss_pct, 0.0, 100.0)),
                BurstR=burst_ratio,
                TELR=self.telr_db if math.isnan(telr_db) else telr_db,
            ).R
        )
