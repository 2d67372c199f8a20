"""The penalties of a difference pair (a, b) that the compiled kernels know, w being the weight."""

ISOTROPIC = 0
"""w sqrt(a^2 + b^2); conjugate 0 on the disc of radius w."""

ANISOTROPIC = 1
"""w (|a| + |b|); conjugate 0 on the square of half side w."""

QUADRATIC = 2
"""w/2 (a^2 + b^2); conjugate (p^2 + q^2) / (2 w)."""
