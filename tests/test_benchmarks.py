"""The benchmarks run and give what they promise; how fast is no matter of a test."""

import json
import subprocess
import sys


def run(*arguments: str) -> subprocess.CompletedProcess[str]:
    command = [sys.executable, "-m", "tests.bench", *arguments]
    return subprocess.run(command, capture_output=True, text=True, check=False, timeout=300)


def test_a_quick_run_prints_one_object_with_figures_and_ratios() -> None:
    result = json.loads(run("--quick", "--json", "forecast").stdout)
    assert set(result["machine"]) >= {"python", "system", "cores"}
    outcome = result["results"]["forecast"]
    planning = outcome["figures"]["forecast of overnight-ladder, planning, s"]
    assert planning["value"] > 0
    assert planning["spread"] >= 0
    assert outcome["ratios"]["forecast night s / planning s"]["value"] > 0


def test_a_benchmark_that_there_is_not_is_refused_by_name() -> None:
    refused = run("fastest")
    assert refused.returncode == 2
    assert "no benchmark fastest; there are model, link," in refused.stderr
