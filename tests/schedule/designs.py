"""Design files with a schedule, for the tests. All data invented."""

from __future__ import annotations

from realize.design import Design, design_from_text

TEXT = """[design]
name = "mixer"
transfer = "{transfer}"
[design.values]
{nominal}
[sampling]
rate = "{rate}"
band = "{band}"
[schedule]
variable = "load"
points = {points}
{schedule}[schedule.values]
{values}
{others}"""


def design(
    transfer: str,
    values: dict[str, list[float]],
    *,
    rate: str = "1 kHz",
    band: str = "20 Hz",
    schedule: str = "",
    others: str = "",
) -> Design:
    """A design whose values are listed from the first point on, at 1, 2, 3 and so on."""
    count = len(next(iter(values.values())))
    text = TEXT.format(
        transfer=transfer,
        nominal="\n".join(f"{name} = {numbers[0]}" for name, numbers in values.items()),
        rate=rate,
        band=band,
        points=list(range(1, count + 1)),
        schedule=schedule,
        values="\n".join(f"{name} = {numbers}" for name, numbers in values.items()),
        others=others,
    )
    return design_from_text(text, "mixer.toml")
