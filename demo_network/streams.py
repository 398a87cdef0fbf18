"""Random numbers, one stream to a concern: what one part draws never moves what another part gets."""

import hashlib

import numpy as np


def stream(seed: int, *names: object) -> np.random.Generator:
    """The stream of that name; the same seed and name give the same numbers, whatever else was drawn."""
    return np.random.default_rng(np.random.SeedSequence([seed, *_words("/".join(map(str, names)))]))


def row_id(seed: int, *names: object) -> str:
    """An identity for one row that says nothing about where the row came from."""
    key = "/".join(map(str, (seed, *names)))
    return hashlib.sha256(key.encode()).hexdigest()[:12]


def _words(name: str) -> list[int]:
    digest = hashlib.sha256(name.encode()).digest()
    return [int.from_bytes(digest[at : at + 4], "big") for at in range(0, 16, 4)]
