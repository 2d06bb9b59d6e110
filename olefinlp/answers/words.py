"""Numbers in sentences."""

from __future__ import annotations


def amount(value: float) -> str:
    """A quantity to four figures, thousands apart.

    >>> amount(2901.6), amount(233.58), amount(0.9)
    ('2,902', '233.6', '0.9')
    """
    return f"{value:,.0f}" if abs(value) >= 999.95 else f"{value:.4g}"


def worth(value: float) -> str:
    """A price to three figures.

    >>> worth(24.5374), worth(2935.77), worth(999.7), worth(0.6556), worth(0.0)
    ('24.5', '2,936', '1,000', '0.656', '0')
    """
    return f"{value:,.0f}" if abs(value) >= 999.5 else f"{value:.3g}"


def percent(share: float) -> str:
    """A share in per cent to two figures.

    >>> percent(0.0012), percent(0.1), percent(1.0139)
    ('0.12 %', '10 %', '101 %')
    """
    return f"{100 * share:.0f} %" if abs(share) >= 0.0995 else f"{100 * share:.2g} %"


def tonnage(kilotonnes: float) -> str:
    """A quantity of mass: kt to one decimal, t where that would show nothing.

    >>> tonnage(47.558), tonnage(0.02722), tonnage(0.0)
    ('47.6 kt', '27.22 t', '0.0 kt')
    """
    if 0 < abs(kilotonnes) < 0.1:
        return f"{1000 * kilotonnes:,.4g} t"
    return f"{kilotonnes:,.1f} kt"


def money(thousands: float, currency: str) -> str:
    """An amount of money in thousands, or in the currency itself where that would show nothing.

    >>> money(134.04, "USD"), money(0.0368, "USD")
    ('134 kUSD', '36.8 USD')
    """
    if abs(thousands) < 10:
        return f"{1000 * thousands:,.4g} {currency}" if abs(thousands) < 1 else f"{thousands:,.2f} k{currency}"
    return f"{thousands:,.0f} k{currency}"
