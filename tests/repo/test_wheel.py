"""The wheel, installed into a clean environment, does the main job on a gallery file."""

from __future__ import annotations

import os
import subprocess
import sys
import venv
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


def run(*command: str | Path) -> str:
    environment = {k: v for k, v in os.environ.items() if k not in ("PYTHONPATH", "VIRTUAL_ENV")}
    done = subprocess.run(command, capture_output=True, text=True, env=environment, cwd="/", check=False)
    assert done.returncode == 0, done.stdout + done.stderr
    return done.stdout


def test_the_wheel_does_the_main_job(tmp_path: Path) -> None:
    venv.create(tmp_path / "env", with_pip=True)
    binaries = tmp_path / "env" / ("Scripts" if os.name == "nt" else "bin")
    run(binaries / "python", "-m", "pip", "wheel", "--quiet", "--no-deps", "-w", tmp_path, ROOT)
    (wheel,) = tmp_path.glob("settled-*.whl")
    site = [p for p in sys.path if p.endswith("site-packages")][0]
    run(binaries / "python", "-m", "pip", "install", "--quiet", "--no-deps", wheel)
    inside = next((tmp_path / "env").rglob("site-packages"))
    (inside / "dependencies.pth").write_text(site + "\n")
    output = run(binaries / "settled", "check", "wake_latch")
    assert "Wake latch of the river gauge" in output
    assert output.count("proved") >= 7
