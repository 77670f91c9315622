"""What the tests of the field share: both kernels, a reference library."""

from __future__ import annotations

import os
from functools import cache

import pytest

from shares.errors import KernelUnavailableError
from shares.field import kernel


@pytest.fixture(scope="session", params=["native", "portable"])
def implementation(request):
    """Each kernel in turn. A missing native kernel is an error where it is demanded."""
    demanded = os.environ.get("SHARES_KERNEL")
    if request.param == "portable":
        return kernel("portable")
    if demanded == "portable":
        pytest.skip("SHARES_KERNEL=portable: the native kernel must not be loaded")
    try:
        return kernel("native")
    except KernelUnavailableError:
        if demanded == "native":
            raise
        pytest.skip("the native kernel is not built here")


@pytest.fixture(scope="session")
def all_moduli(vectors):
    """The 30 irreducible polynomials of degree 8 over GF(2): Lidl, Niederreiter; Peterson, Weldon, appendix C."""
    moduli = [int(entry["hex"], 16) for entry in vectors("finite_fields")["irreducible_degree_8_over_gf2"]]
    assert len(moduli) == 30
    return moduli


@pytest.fixture(scope="session")
def reference_field():
    """Make fields with galois, a general-purpose library. Its import is slow, so it is only done here."""
    import galois

    def make(p, coefficients_high_first):
        f = galois.Poly(coefficients_high_first, field=galois.GF(p, compile="python-calculate"))
        return galois.GF(p**f.degree, irreducible_poly=f, verify=False, compile="python-calculate")

    return cache(lambda p, coefficients: make(p, list(coefficients)))


@pytest.fixture(scope="session")
def reference_products(reference_field):
    """All 65,536 products of a field GF(2^8) by galois, as 256 ``bytes`` of 256."""
    import numpy

    @cache
    def products(modulus):
        field = reference_field(2, tuple(map(int, f"{modulus:b}")))
        elements = field(numpy.arange(256, dtype=numpy.uint8))
        return [line.tobytes() for line in numpy.multiply.outer(elements, elements).astype(numpy.uint8)]

    return products
