"""Numbers in sentences."""

from __future__ import annotations


def amount(value: float) -> str:
    """A quantity to four figures, thousands apart.

    >>> amount(2901.6), amount(233.58), amount(0.9)
    ('2,902', '233.6', '0.9')
    """
    return f"{value:,.0f}" if abs(value) >= 1000 else f"{value:.4g}"


def worth(value: float) -> str:
    """A price to three figures.

    >>> worth(24.5374), worth(2935.77), worth(0.6556), worth(0.0)
    ('24.5', '2,936', '0.656', '0')
    """
    return f"{value:,.0f}" if abs(value) >= 1000 else f"{value:.3g}"


def percent(share: float) -> str:
    """A share in per cent to two figures.

    >>> percent(0.0012), percent(0.1)
    ('0.12 %', '10 %')
    """
    return f"{100 * share:.2g} %"
