"""Results as text and pictures; nothing is fitted here.

`text` and `numbers` make strings and need no drawing library; every other module draws.
"""
