"""Sources that are copied beside a generated ``field.py`` and compiled there; see ``tracer/kernels/build.py``."""
