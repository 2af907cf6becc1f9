"""Which wirings of a biological mechanism do the data rule out?"""

__version__ = "0.1.0"
