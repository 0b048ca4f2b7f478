"""Tables of a comparison as Markdown."""

from __future__ import annotations

from typing import Any


def markdown(result: dict[str, Any]) -> str:
    """Return the whole result as Markdown."""
    machine = result["machine"]
    lines = ["# windage against what users would write instead", ""]
    for name, value in machine.items():
        shown = ", ".join(f"{k} {v}" for k, v in value.items()) if isinstance(value, dict) else value
        lines.append(f"* {name}: {shown}")
    peak = result.get("peak")
    if peak:
        lines.append(
            f"* peak of these cores: {peak['separate']:.1f} GFlop/s with separate multiplications and additions, "
            f"{peak['fused']:.1f} GFlop/s fused"
        )
    for loop in result["loops"]:
        heading = f"## Loop ({loop['letter']}): {loop['title']}"
        lines += ["", heading, "", *table(loop), *shortened(loop), *roofline(loop, peak)]
    return "\n".join(lines) + "\n"


def table(loop: dict[str, Any]) -> list[str]:
    """Return the table of one loop; of a check, what was compared."""
    if not any("nanoseconds" in row for row in loop["programs"]):
        rows = [f"| {r['label']} | {r.get('missing') or r['agreement']} |" for r in loop["programs"][1:]]
        return ["| program | largest difference of its measures from windage's |", "|---|---|", *rows]
    lines = [
        "| program | ns per trial and sample | times slower than windage: median (min to max) | agreement |",
        "|---|---|---|---|",
    ]
    for row in loop["programs"]:
        if "missing" in row:
            lines.append(f"| {row['label']} | | | left out: {row['missing']} |")
            continue
        if "nanoseconds" not in row:
            lines.append(f"| {row['label']} | | | {row['agreement']} |")
            continue
        ns, ratio = row["nanoseconds"], row.get("ratio")
        times = f"{shown(ratio['median'])} ({shown(ratio['min'])} to {shown(ratio['max'])})" if ratio else "1"
        lines.append(f"| {row['label']} | {shown(ns['median'])} | {times} | {row['agreement']} |")
    return lines


def shortened(loop: dict[str, Any]) -> list[str]:
    """Return which programs were timed on the beginning of a trial only."""
    lines = []
    for row in loop["programs"]:
        if row.get("samples timed", loop["samples"]) < loop["samples"]:
            first = f"the first {row['samples timed']} of {loop['samples']} samples"
            lines += ["", f"{row['label']}: timed on {first} of a trial."]
    return lines


def roofline(loop: dict[str, Any], peak: dict[str, float] | None) -> list[str]:
    """Return what part of the peak is reached, where the operations were counted."""
    if not loop["operations"] or not peak:
        return []
    lines = ["", f"Roofline, {loop['operations']} operations a trial and sample:"]
    for row in loop["programs"]:
        if "nanoseconds" in row and row["name"] in ("windage", "fused"):
            rate = loop["operations"] / row["nanoseconds"]["median"]
            share = 100 * rate / peak["separate"]
            lines.append(f"{row['label']} {rate:.1f} GFlop/s, {share:.0f} % of the separate peak;")
    return ["", " ".join(lines[1:]).rstrip(";") + "."]


def shown(x: float) -> str:
    """Return a number with three digits."""
    return f"{x:.0f}" if x >= 100 else f"{x:.3g}"
