"""Draw the picture of the README: `python notebooks-examples/draw_demo.py`.

It is the one that `windage demo` leaves, with fewer parameters. What it was drawn from stands in the file itself.
"""

from __future__ import annotations

from pathlib import Path

from windage._demo import DEMO_AT_LEAST, DEMO_CONFIDENCE, DEMO_TRIALS, demo_study
from windage._plot_style import StudyFigure

PICTURE = Path(__file__).with_name("windage-demo.png")
DPI = 70


def draw() -> tuple[StudyFigure, dict[str, str]]:
    """Return the picture, and what its file says of itself."""
    outcome = demo_study().run(DEMO_TRIALS, progress=False)
    verdict = outcome.verdict(DEMO_AT_LEAST, DEMO_CONFIDENCE)
    figure = outcome.plot(verdict=verdict, parameters=2)
    return figure, {"Description": f"study {outcome.study.digest}: {verdict.headline}"}


if __name__ == "__main__":
    drawn, metadata = draw()
    drawn.savefig(PICTURE, dpi=DPI, metadata=metadata)
    print(f"Wrote {PICTURE}")
