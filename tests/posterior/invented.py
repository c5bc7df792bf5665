"""The invented orbit that the tests of the posterior share."""

from relorbit.orbit.elements import Elements

ORBIT = Elements(50.0, 1990.0, 0.3, 1.0, 60.0, 40.0, 100.0)
