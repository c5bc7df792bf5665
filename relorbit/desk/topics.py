"""Kinds of change that views are told of."""

PAIR, ORBIT, SELECTION, VIEW, FILE = "pair", "orbit", "selection", "view", "file"
