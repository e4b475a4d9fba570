"""The run statement: what went in, what came out, and on which machine; the report never prints its digest (C15).

Source: in-toto Statement v1 and SLSA provenance v1 for the names of the parts (cited from memory).
"""

from __future__ import annotations

import json
import os
import platform
from importlib import metadata
from pathlib import Path
from typing import Any, Protocol

from projector.arithmetic import KERNELS_DIGEST
from projector.run.publish import file_digest
from projector.study.records import Study

PACKAGES = (
    "projector", "numpy", "pandas", "scipy", "pyarrow", "jinja2", "numba", "llvmlite", "pydantic", "matplotlib",
    "XlsxWriter", "python-calamine",
)  # fmt: skip


class Stated(Protocol):
    """What a statement is made of: a run's results or those of another command."""

    @property
    def study(self) -> Study: ...
    @property
    def set_digest(self) -> str: ...
    @property
    def result_digests(self) -> dict[str, str]: ...


def processor() -> str:
    """Name of the processor, as the system gives it."""
    try:
        lines = Path("/proc/cpuinfo").read_text(encoding="utf-8").splitlines()
    except OSError:
        return platform.processor()
    return next((line.split(":", 1)[1].strip() for line in lines if line.startswith("model name")), platform.machine())


def versions() -> dict[str, str]:
    """Versions of what the numbers rest on."""
    out = {"python": platform.python_version()}
    for name in PACKAGES:
        try:
            out[name] = metadata.version(name)
        except metadata.PackageNotFoundError:
            out[name] = "not installed"
    return out


def run_statement(results: Stated, folder: Path, options: dict[str, Any]) -> dict[str, Any]:
    """The statement of a finished folder: subjects by digest, inputs, options, versions and machine."""
    subjects = [
        {"name": path.relative_to(folder).as_posix(), "digest": {"sha256": file_digest(path)}}
        for path in sorted(folder.rglob("*"))
        if path.is_file()
    ]
    return {
        "_type": "https://in-toto.io/Statement/v1",
        "subject": subjects,
        "predicateType": "https://slsa.dev/provenance/v1",
        "predicate": {
            "buildDefinition": {
                "externalParameters": options,
                "inputDigest": results.study.input_digest,
                "pathSetDigest": results.set_digest,
                "resultDigests": results.result_digests,
                "kernelSources": KERNELS_DIGEST,
                "resolvedDependencies": [
                    {"name": f.name, "digest": {"sha256": f.sha256}, "bytes": f.bytes} for f in results.study.files
                ],
            },
            "runDetails": {
                "versions": versions(),
                "machine": {"system": platform.system(), "architecture": platform.machine(), "processor": processor()},
                "processors": os.cpu_count(),
            },
        },
    }


def write_statement(results: Stated, folder: Path, options: dict[str, Any]) -> None:
    """Written last, so that a folder with a statement is a whole one."""
    text = json.dumps(run_statement(results, folder, options), indent=2, sort_keys=True, ensure_ascii=False)
    (folder / "run_statement.json").write_text(text + "\n", encoding="utf-8")
