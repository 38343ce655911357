"""Coverage maps for point-to-multipoint wireless networks.

The rooms of the package, and which may import which, are listed in DEVELOPERS.md.
"""

__version__ = "0.2.0"
