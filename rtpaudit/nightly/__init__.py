"""Nightly: sources and a store come in; the store grows by what is new, and each night gets its figures and its page.

An engine (local processes, or a cluster) does the work in pieces of captures, results are committed to the store batch
by batch, and everything that people read is made from the store alone.
"""
