"""The mathematics of sharing rows of bytes over GF(2^8): polynomials, rules, checks, recovery with wrong points."""
