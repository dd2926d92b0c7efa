"""Listening checks: an audit comes in, clips, a rating sheet and a key go out; votes come in and meet the prediction.

The listeners get one folder, in which nothing tells what a clip is; the key that does stays outside of it.
"""
