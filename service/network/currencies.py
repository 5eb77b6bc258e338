"""Currencies of ISO 4217 (list one, as amended to January 2026) and their minor units.

The minor unit is how many decimals the smallest unit of account has. Codes without one (precious
metals, bond units, the code for testing and the one for "no currency") cannot price a plan.
"""

from typing import Final

_MINOR_UNITS: Final = {
    0: "BIF CLP DJF GNF ISK JPY KMF KRW PYG RWF UGX UYI VND VUV XAF XOF XPF",
    2: (
        "AED AFN ALL AMD AOA ARS AUD AWG AZN BAM BBD BDT BMD BND BOB BOV BRL BSD BTN BWP BYN BZD "
        "CAD CDF CHE CHF CHW CNY COP COU CRC CUP CVE CZK DKK DOP DZD EGP ERN ETB EUR FJD FKP GBP "
        "GEL GHS GIP GMD GTQ GYD HKD HNL HTG HUF IDR ILS INR IRR JMD KES KGS KHR KPW KYD KZT LAK "
        "LBP LKR LRD LSL MAD MDL MGA MKD MMK MNT MOP MRU MUR MVR MWK MXN MXV MYR MZN NAD NGN NIO "
        "NOK NPR NZD PAB PEN PGK PHP PKR PLN QAR RON RSD RUB SAR SBD SCR SDG SEK SGD SHP SLE SOS "
        "SRD SSP STN SVC SYP SZL THB TJS TMT TOP TRY TTD TWD TZS UAH USD USN UYU UZS VED VES WST "
        "XAD XCD XCG YER ZAR ZMW ZWG"
    ),
    3: "BHD IQD JOD KWD LYD OMR TND",
    4: "CLF UYW",
}
_BY_CODE: Final = {
    code: decimals for decimals, codes in _MINOR_UNITS.items() for code in codes.split()
}
_WITHOUT_MINOR_UNIT: Final = frozenset(
    ("XAG", "XAU", "XBA", "XBB", "XBC", "XBD", "XDR", "XPD", "XPT", "XSU", "XTS", "XUA", "XXX")
)


def is_currency(code: str) -> bool:
    """Return whether ``code`` is in ISO 4217, with or without a minor unit."""
    return code in _BY_CODE or code in _WITHOUT_MINOR_UNIT


def minor_units(code: str) -> int | None:
    """Return the decimals of a currency's smallest unit, None where it has none or is unknown."""
    return _BY_CODE.get(code)
