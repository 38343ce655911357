"""Published radio models as pure functions: numbers in, numbers out.

Scalar compiled functions (names ending ``_scalar``) hold each formula once; the raster sweep and
the single path call them, and the public array functions are thin wrappers over them.
"""
