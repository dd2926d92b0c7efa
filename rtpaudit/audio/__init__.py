"""Sound bench: samples and payload octets of one stream in, measures and faults of the sound out.

Knows nothing of captures or calls. Samples are int16 timelines with their sampling rate and, where packets are missing,
a mask of what was received; octets are payloads as sent.
"""
