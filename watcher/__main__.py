"""The command `spikewarden`, the same as ``python -m watcher``."""

from __future__ import annotations

from watcher.commands import main

if __name__ == "__main__":
    main(prog_name="spikewarden")
