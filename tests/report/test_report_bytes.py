"""The same bytes in every process: hash seed, time zone, language and folder do not enter."""

import hashlib
import os
import subprocess
import sys
from pathlib import Path

HERE = Path(__file__).parent
PROGRAM = """
import hashlib, sys
sys.path[:0] = [sys.argv[1], sys.argv[2]]
from synthetic_results import Options, build
from projector.report.publish import published
made = published(build(Options(months=120)), "projector run x")
table = made.addresses.to_csv(index=False).encode()
print(*(hashlib.sha256(part).hexdigest() for part in (made.html.encode(), made.workbook, table)))
"""


def _digests(folder: Path, **changed: str) -> list[str]:
    command = [sys.executable, "-c", PROGRAM, str(HERE.parents[1]), str(HERE)]
    environment = {**os.environ, **changed}
    done = subprocess.run(command, capture_output=True, text=True, cwd=folder, env=environment, check=True)
    return done.stdout.split()


def test_order_page_workbook_and_addresses_are_the_same_bytes_in_two_processes(tmp_path):
    (tmp_path / "matplotlibrc").write_text("font.size: 20\nsvg.hashsalt: other\n", encoding="utf-8")
    one = _digests(HERE, PYTHONHASHSEED="1", TZ="UTC", LANG="C")
    two = _digests(tmp_path, PYTHONHASHSEED="77", TZ="Asia/Tokyo", LANG="de_DE.UTF-8", MPLBACKEND="svg")
    assert one == two
    assert len(one) == 3


def test_order_rendering_twice_in_one_process_gives_the_same_text(results, html):
    from projector.report.render import render_report

    again = render_report(results, "projector run scenarios/example")
    assert hashlib.sha256(again.encode()).digest() == hashlib.sha256(html.encode()).digest()
