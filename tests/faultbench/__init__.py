"""The fault bench: captures with a known fault, made by seed from real speech, and clean ones beside them.

``python -m tests.faultbench`` makes them all, asks the findings, and writes docs/faultbench.md.
"""
