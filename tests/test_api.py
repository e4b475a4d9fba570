"""The package's own functions, as the README shows them."""

from __future__ import annotations

from pathlib import Path


def test_known_the_package_functions_can_be_called_one_after_another(hand_folder: Path) -> None:
    import projector

    projector.check_study(hand_folder)
    results = projector.run_study(hand_folder)
    assert projector.render_report(results).startswith("<!DOCTYPE html>")
    again = projector.run_study(hand_folder)
    assert again.result_digests == results.result_digests
    assert set(projector.result_columns()) == set(results.tables())
