"""Both ways of running the kernels give the same bits, and the build knows every kernel there is."""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import pytest

import seqmix
from seqmix import kernels

ROOT = Path(seqmix.__file__).parent

PRINT = """
import hashlib, json, sys
from seqmix import kernels, testing
from seqmix.mixture.mixture import Mixture
from seqmix.mixture.numbers import NumberMixture
from seqmix.models import registry
from seqmix.models.compressed import Compressed
out = {"mode": kernels.MODE}
for model in registry.MODELS:
    for kind in model.kinds:
        one = testing.made(model, kind)()
        rows = testing.states_log(kind, 100 if issubclass(model, Compressed) else 400)
        bits = one.absorb(rows)
        law = one.predict(None if rows.times is None else int(rows.times[-1]) + 60_000_000)
        out[f"{kind} {model.name}"] = hashlib.sha256(bits.tobytes() + law.masses.tobytes()).hexdigest()
for kind in ("states", "bytes"):
    bits = Mixture(kind=kind).absorb(testing.states_log(kind, 150).codes)
    out[kind] = hashlib.sha256(bits.tobytes()).hexdigest()
for name, log in testing.NUMBER_LOGS.items():
    mixture = NumberMixture(context=testing.CONTEXT)
    rows = log(150)
    bits = mixture.absorb(rows)
    quantiles = mixture.predict(int(rows.times[-1]) + testing.HOUR).quantile([0.1, 0.5, 0.9])
    out[f"numbers {name}"] = hashlib.sha256(bits.tobytes() + quantiles.tobytes()).hexdigest()
print(json.dumps(out))
"""


def digests(mode: str) -> dict[str, str]:
    done = subprocess.run(
        [sys.executable, "-c", PRINT],
        env={**os.environ, "SEQMIX_KERNELS": mode}, capture_output=True, text=True, check=True, timeout=300,
    )  # fmt: skip
    return json.loads(done.stdout)


@pytest.mark.skipif(kernels.MODE == "interpreted", reason="no compiled kernels in this install")
def test_compiled_and_interpreted_give_equal_bits() -> None:
    compiled, interpreted = digests("compiled"), digests("interpreted")
    assert (compiled.pop("mode"), interpreted.pop("mode")) == ("compiled", "interpreted")
    assert compiled == interpreted


def test_the_build_lists_every_kernel() -> None:
    on_disk = {path.stem for path in (ROOT / "kernels").glob("*_cy.py")}
    assert set(kernels.NAMES) == on_disk
    project = ROOT.parent / "pyproject.toml"
    if project.exists():
        assert set(kernels.NAMES) == {
            line.split(".")[-1].strip('"')
            for line in project.read_text(encoding="utf-8").splitlines()
            if line.startswith('name = "seqmix.kernels.')
        }


def test_a_wrong_choice_of_kernels_is_refused() -> None:
    done = subprocess.run(
        [sys.executable, "-c", "import seqmix.kernels"],
        env={**os.environ, "SEQMIX_KERNELS": "fast"}, capture_output=True, text=True, timeout=60,
    )  # fmt: skip
    assert done.returncode != 0
    assert "SEQMIX_KERNELS is 'fast'; it may be compiled or interpreted" in done.stderr
