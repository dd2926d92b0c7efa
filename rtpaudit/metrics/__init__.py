"""Network figures of one stream: plain columns in order of arrival in, figures under the names of the tables out.

All modules agree on the columns of one stream, shape (n,), in order of arrival:

extended       sequence number that goes on over wraps; each segment numbers on its own [packets]
segment        0, and one more for every restart or jump of the source; a late packet may carry an earlier one
duplicate      the number had come before
media_ticks    RTP timestamp that goes on over wraps [ticks of the RTP clock]
time_ns        arrival [ns]
clock_rate_hz  RTP clock of the packet's payload type [Hz]

`loss` accounts for every number, `gaps` dates what is missing, `bursts` says how it clusters, `jitter`, `delay` and
`clock` measure time, `windows` lays all of it along the stream, and `network` is the one call that gives everything.
"""
