"""Option types that several commands share."""

from __future__ import annotations

import click


class MillerIndices(click.ParamType):  # type: ignore[type-arg,unused-ignore]
    """h,k,l as three integers, not all zero."""

    name = "h,k,l"

    def convert(
        self, value: object, param: click.Parameter | None, ctx: click.Context | None
    ) -> tuple[int, int, int]:
        if isinstance(value, tuple):
            return value
        try:
            h, k, l = (int(part) for part in str(value).split(","))
        except ValueError:
            self.fail(f"{value!r} is not three integers such as 0,0,1", param, ctx)
        if h == k == l == 0:
            self.fail("Miller indices cannot all be 0", param, ctx)
        return h, k, l


class LowerGaps(click.ParamType):  # type: ignore[type-arg,unused-ignore]
    """`all`, or numbers of bands with commas between them."""

    name = "all|N,M,…"

    def convert(
        self, value: object, param: click.Parameter | None, ctx: click.Context | None
    ) -> str | list[int]:
        if isinstance(value, list) or value == "all":
            return value
        try:
            numbers = [int(part) for part in str(value).split(",")]
        except ValueError:
            self.fail(f"{value!r} is neither all nor numbers such as 10,14", param, ctx)
        if min(numbers) < 1:
            self.fail("numbers of bands begin with 1", param, ctx)
        return numbers


case_argument = click.argument("case", type=click.Path(), metavar="CASE")
