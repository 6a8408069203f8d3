"""Names of the demo problems that the repository ships."""

from pathlib import Path

FOLDER = Path(__file__).resolve().parents[1] / "problems"

#: Every demo problem, by file name without suffix.
DEMOS = tuple(sorted(path.stem for path in FOLDER.glob("*.toml")))

#: The six regimes that the project must show.
REGIMES = ("bruise", "yellow-stain", "two-inks", "thin-film", "moisture", "fast-web")
