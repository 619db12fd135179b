"""Lines of the budget for the kinds that a calibration file may not leave out, all of zero."""

from __future__ import annotations

KINDS = (
    "out_of_band",
    "cross_axis",
    "isotropy",
    "near_field",
    "own_body",
    "drift",
    "polarisation",
)


def confirmed(*kinds: str) -> str:
    """What a person writes who has found that each of these adds nothing."""
    return "".join(
        f'\n[[contribution]]\nname = "{kind}, none"\nvalue = 0\ndistribution = "rectangular"\n'
        f'shared = true\nkind = "{kind}"\n'
        for kind in kinds or KINDS
    )
