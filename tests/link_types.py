"""Link the three folders under one name, so that type checkers see them as they are imported: run before mypy."""

from pathlib import Path

HOUSE = Path(__file__).resolve().parents[1]
LINKS = HOUSE / "build" / "typing" / "spikeward"
LINKS.mkdir(parents=True, exist_ok=True)
for name in ("daemon", "parsers", "rules"):
    link = LINKS / name
    link.unlink(missing_ok=True)
    link.symlink_to(HOUSE / name, target_is_directory=True)
