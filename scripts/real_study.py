"""Set up everything and run three markets on open data: `python scripts/real_study.py`."""

from environment import ROOT, prepare, run

if __name__ == "__main__":
    python = prepare("open-data")
    data = ROOT / "runs" / "real_study" / "data"
    run([python, ROOT / "scripts" / "open_data.py", data])
    run([python, "-m", "carrylab", "run", data / "study.toml", "--into", ROOT / "runs" / "real_study" / "results"])
