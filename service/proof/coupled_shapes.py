"""Shapes of what a certificate says of items that share limits."""

from typing import Final

from service.proof.shapes import (
    is_amount,
    is_count,
    is_text,
    is_whole,
    list_of,
    one_of,
    or_null,
    record,
)

SIDES: Final = ("received", "in", "out", "sent", "demand", "stock", "keep")

_PROOF_TOGETHER = record(
    {
        "scale": is_amount,
        "multipliers": list_of(
            record(
                {
                    "rule": or_null(is_text),
                    "site": or_null(is_text),
                    "lane": or_null(is_text),
                    "value": is_amount,
                }
            )
        ),
        "caps": list_of(record({"priority": is_count, "value": is_amount})),
        "prices": list_of(
            record(
                {
                    "item": is_text,
                    "nodes": list_of(
                        record(
                            {
                                "site": is_text,
                                "side": one_of(*SIDES),
                                "qualifier": or_null(is_text),
                                "price": is_whole,
                            }
                        )
                    ),
                }
            )
        ),
    }
)
CIRCLE = record({"items": list_of(is_text), "proofs": list_of(or_null(_PROOF_TOGETHER))})
CONTRADICTION = record({"items": list_of(is_text), "proof": or_null(_PROOF_TOGETHER)})
ONE_MORE = record(
    {
        "site": or_null(is_text),
        "lane": or_null(is_text),
        "measure": is_text,
        "cost": is_amount,
    }
)
