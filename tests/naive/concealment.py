"""ITU-T G.711 Appendix I as a receiver does it: 10 ms in, 10 ms out 3.75 ms later, in double precision."""

import math


class Receiver:
    """One channel. Every frame, lost or not, goes into the history, and the output is read out of it."""

    def __init__(self):
        self.history = [0] * 390
        self.lost_frames = 0

    def frame(self, samples):
        """Next 80 samples of output; ``samples`` is None for a lost frame."""
        if samples is None:
            samples = self.synthetic_frame()
            self.lost_frames += 1
        elif self.lost_frames:
            samples = self.first_frame_after(samples)
            self.lost_frames = 0
        self.history = self.history[80:] + list(samples)
        return self.history[390 - 80 - 30 : 390 - 30]

    def synthetic_frame(self):
        if self.lost_frames == 0:
            self.past = [float(one) for one in self.history]
            self.pitch = pitch(self.past)
            self.quarter = self.pitch // 4
            self.ending = self.past[-self.quarter :]
            self.place = 0
            self.use_periods(1)
            self.history[-self.quarter :] = [int(one) for one in self.cycle[-self.quarter :]]
            return self.read(80)
        if self.lost_frames >= 6:
            return [0] * 80
        if self.lost_frames in (1, 2):
            place = self.place
            going_on = self.read(self.quarter)
            self.place = place
            while self.place > self.pitch:
                self.place -= self.pitch
            self.use_periods(self.lost_frames + 1)
            frame = self.read(80)
            frame[: self.quarter] = overlap_add(going_on, frame[: self.quarter], 1.0)
        else:
            frame = self.read(80)
        gain = 1.0 - 0.2 * (self.lost_frames - 1)
        return [int(one * (gain - 0.2 / 80 * i)) for i, one in enumerate(frame)]

    def first_frame_after(self, samples):
        count = min(self.quarter + 32 * (self.lost_frames - 1), 80)
        going_on = self.read(count)
        gain = max(0.0, 1.0 - 0.2 * (self.lost_frames - 1))
        return overlap_add(going_on, samples[:count], gain) + list(samples[count:])

    def use_periods(self, number):
        """The last so many pitch periods, their end bent so that it leads into their beginning."""
        length = number * self.pitch
        lead_in = self.past[-length - self.quarter : len(self.past) - length]
        bent = [
            self.ending[i] * (1 - (i + 1) / self.quarter) + lead_in[i] * (i + 1) / self.quarter
            for i in range(self.quarter)
        ]
        self.cycle = self.past[-length : -self.quarter] + bent

    def read(self, count):
        taken = []
        for _ in range(count):
            taken.append(int(self.cycle[self.place]))
            self.place = (self.place + 1) % len(self.cycle)
        return taken


def overlap_add(left, right, gain):
    count = len(left)
    mixed = [left[i] * gain * (1 - (i + 1) / count) + right[i] * (i + 1) / count for i in range(count)]
    return [int(min(max(one, -32768), 32767)) for one in mixed]


def pitch(past):
    """Lag of 40 to 120 with the greatest normalised correlation over 20 ms."""

    def correlation(lag, step):
        newest = past[-160::step]
        earlier = past[-160 - lag : len(past) - lag : step]
        energy = max(sum(one * one for one in earlier), 250.0)
        return sum(a * b for a, b in zip(newest, earlier, strict=True)) / math.sqrt(energy)

    coarse = max(range(40, 121, 2), key=lambda lag: (correlation(lag, 2), -lag))
    return max(
        (lag for lag in (coarse + 1, coarse, coarse - 1) if 40 <= lag <= 120), key=lambda lag: correlation(lag, 1)
    )


def conceal(samples, lost):
    """The whole signal, the delay taken out."""
    receiver = Receiver()
    heard = []
    for k in range(len(samples) // 80):
        heard += receiver.frame(None if lost[k] else list(samples[80 * k : 80 * k + 80]))
    return heard[30:]
