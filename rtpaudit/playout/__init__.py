"""Playout: what a receiver makes of a stream. Arrival times, media times and samples in; what was heard out.

``timeline`` lays payloads on the RTP timeline, ``buffer`` simulates the playout buffer, ``what_if`` its other
settings, and ``concealment`` fills in what was lost.
"""
