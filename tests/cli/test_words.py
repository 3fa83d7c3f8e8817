"""Every finding code that code uses stands in the catalogue, and the README's claims hold."""

from __future__ import annotations

import re
from pathlib import Path

from schorl.findings import catalogue
from schorl.jobs import known_keys

ROOT = Path(__file__).resolve().parents[2]


def test_every_code_that_is_used_is_explained():
    used = set()
    for path in (ROOT / "src").rglob("*.py"):
        text = path.read_text(encoding="utf-8")
        used |= set(
            re.findall(r'"((?:IN|JOB|MAP|RATE|OUT|ZONE|MACHINE|RUN|SEASON)-[A-Z-]+)"', text)
        )
    assert used <= set(catalogue()), used - set(catalogue())


def test_every_entry_says_what_to_do():
    for entry in catalogue().values():
        assert entry.title
        assert entry.explanation
        assert entry.way_out
        assert (entry.exit > 0) == (entry.severity == "error"), entry.code


def test_readme_stays_short_and_its_commands_are_real():
    text = (ROOT / "README.md").read_text(encoding="utf-8")
    assert len(text.splitlines()) < 200
    for script in re.findall(r"python (scripts/\w+\.py)", text):
        assert (ROOT / script).exists()
    assert {"python scripts/demo.py", "python scripts/test.py"} <= set(
        re.findall(r"^(python scripts/\w+\.py)$", text, flags=re.MULTILINE)
    )


def test_readme_blocks_run_in_order(tmp_path):
    """Each `$ schorl ...` line of a console block runs, and ends as the README says."""
    import shlex
    import shutil
    import subprocess
    import sys

    text = (ROOT / "README.md").read_text(encoding="utf-8")
    shutil.copytree(ROOT / "sample_fields", tmp_path / "sample_fields")
    blocks = re.findall(r"```console\n(.*?)```", text, flags=re.DOTALL)
    assert blocks
    lines = [line for block in blocks for line in block.replace("\\\n", " ").splitlines() if line]
    for place, line in enumerate(lines):
        if not line.startswith("$ schorl "):
            continue
        command = [sys.executable, "-m", *shlex.split(line[2:], comments=True)]
        done = subprocess.run(
            command, cwd=tmp_path, capture_output=True, text=True, encoding="utf-8", check=False
        )
        wanted = int(match.group(1)) if (match := re.search(r"# exit (\d+)", line)) else 0
        assert done.returncode == wanted, (line, done.stderr)
        following = lines[place + 1] if place + 1 < len(lines) else "$"
        if not following.startswith("$"):
            assert following.strip() in done.stdout + done.stderr


def test_job_keys_are_listed_for_contributors():
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    sections = {key for key in known_keys() if "." not in key}
    assert all(f"`{one}`" in text for one in sections)
