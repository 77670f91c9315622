"""The group of prime order within edwards25519, over a vetted library: secret scalars, public points."""
