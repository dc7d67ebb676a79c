"""Set up everything and run the demo study: `python scripts/demo.py`."""

from environment import ROOT, prepare, run

if __name__ == "__main__":
    python = prepare()
    study = ROOT / "datasets_demo" / "clean" / "study.toml"
    run([python, "-m", "carrylab", "run", study, "--into", ROOT / "runs" / "demo"])
