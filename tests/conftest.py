"""Settings shared by all tests: the same random cases on every run, and no time limit per case."""

import sys
import tomllib
from pathlib import Path

import pytest
from hypothesis import HealthCheck, Phase, settings

settings.register_profile(
    "repeatable",
    derandomize=True,
    deadline=None,
    max_examples=12,
    database=None,
    phases=(Phase.explicit, Phase.generate),
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large],
)
settings.load_profile("repeatable")

REFERENCES = Path(__file__).parent / "references"


@pytest.fixture(scope="session")
def kinematics() -> dict:
    """Outside values of `references/kinematics.toml`."""
    return tomllib.loads((REFERENCES / "kinematics.toml").read_text(encoding="utf-8"))


@pytest.fixture(autouse=True)
def fresh_work():
    """No study made ready under one test's settings serves another."""
    yield
    made = sys.modules.get("study.plain_work")
    if made is not None:
        made.from_plain.cache_clear()
