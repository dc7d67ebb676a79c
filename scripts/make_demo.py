"""Write the demo data anew: `python scripts/make_demo.py [FOLDER]`; the folder is datasets_demo by default."""

import sys
from pathlib import Path

from carrylab.demo import SEED, world, write_clean, write_dirty

if __name__ == "__main__":
    folder = Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).resolve().parent.parent / "datasets_demo"
    for name, write in (("clean", write_clean), ("dirty", write_dirty)):
        (folder / name).mkdir(parents=True, exist_ok=True)
        write(world(SEED), folder / name)
