"""Where the demo samples lie."""

from pathlib import Path

DEMO = Path(__file__).parents[2] / "seed_data" / "demo"
