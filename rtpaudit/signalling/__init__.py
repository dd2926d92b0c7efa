"""The signalling room: what endpoints said about their calls."""
