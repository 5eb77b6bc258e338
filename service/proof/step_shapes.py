"""Shapes of the steps of what is minimised, of one item or of several together."""

from service.proof.shapes import Shape, is_amount, is_count, is_text, list_of, one_of, record

_SHORTAGE_STEP = record(
    {
        "item": is_text,
        "of": one_of("shortage"),
        "priority": is_count,
        "achieved": is_amount,
        "bound": is_amount,
    }
)
_COST_STEP = record(
    {"item": is_text, "of": one_of("cost", "lateness"), "achieved": is_amount, "bound": is_amount}
)
_TOGETHER: dict[str, Shape] = {
    "items": list_of(is_text),
    "achieved": is_amount,
    "bound": is_amount,
}
_SHORTAGE_TOGETHER = record(
    {**_TOGETHER, "of": one_of("shortage"), "priority": is_count, "measure": is_text}
)
_COST_TOGETHER = record({**_TOGETHER, "of": one_of("cost")})


def step(value: object) -> str | None:
    """Accept a step of shortage or of cost, of one item or of several together."""
    if not isinstance(value, dict):
        return ": not an object"
    costs, together = value.get("of") != "shortage", "items" in value
    if together:
        return _COST_TOGETHER(value) if costs else _SHORTAGE_TOGETHER(value)
    return _COST_STEP(value) if costs else _SHORTAGE_STEP(value)
