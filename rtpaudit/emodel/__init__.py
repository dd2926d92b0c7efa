"""E-model: planning values, delay and loss in; rating, its parts, its words and its budget out.

``g107`` rates, ``g113`` knows the codecs, ``g109`` has the words, ``delay`` adds up the way from mouth to ear, and
``budget`` shares the points out among the causes. Arrays of any shape in, arrays of their common shape out.
"""
