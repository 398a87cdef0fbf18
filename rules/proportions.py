"""How sure a share of looks can be: the Wilson score interval."""

from math import sqrt


def wilson(found: int, looked: int, z: float = 1.959964) -> tuple[float, float]:
    """An interval for a share that holds for few and for rare cases too.

    Parameters
    ----------
    found, looked : int
        How many of how many; found at most looked.
    z : float
        The normal quantile of the wanted confidence [-]; the default is 95 %.

    Returns
    -------
    tuple of float
        Lower and upper end, 0 to 1; the whole range where nobody looked.

    Notes
    -----
    Units within one spot are not independent; give it whole looks.

    References
    ----------
    E. B. Wilson, J. Am. Stat. Assoc. 22:209–212, 1927, doi 10.1080/01621459.1927.10502953.
    """
    if not 0 <= found <= looked:
        raise ValueError(f"{found} of {looked} is no share")
    if not looked:
        return 0.0, 1.0
    share, scale = found / looked, 1 + z * z / looked
    middle = share + z * z / (2 * looked)
    half = z * sqrt(share * (1 - share) / looked + z * z / (4 * looked * looked))
    return max(0.0, (middle - half) / scale), min(1.0, (middle + half) / scale)
