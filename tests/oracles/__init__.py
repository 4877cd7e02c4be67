"""Independent computations beside the program: closed forms, enumeration, quadrature, arbitrary precision."""
