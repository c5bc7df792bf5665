"""Puts this folder on the path of the tests below it, so that they can import `simulate`."""
