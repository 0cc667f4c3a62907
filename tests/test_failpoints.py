"""Failpoints do nothing unless armed, and then what they are told, once."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Iterator

import pytest

from recon import failpoints


@pytest.fixture(autouse=True)
def disarmed() -> Iterator[None]:
    yield
    failpoints.disarm()


def test_a_point_that_is_not_armed_does_nothing() -> None:
    for name in failpoints.NAMES:
        failpoints.reach(name)


def test_a_point_fails_at_the_pass_asked_for_and_only_once() -> None:
    failpoints.arm("mid_publish=raise@2")
    failpoints.reach("mid_publish")
    with pytest.raises(failpoints.ReachedError, match="mid_publish"):
        failpoints.reach("mid_publish")
    failpoints.reach("mid_publish")


def test_a_cut_point_breaks_the_connection_in_use() -> None:
    broken: list[str] = []
    failpoints.arm("before_commit=cut")
    failpoints.reach("before_commit", cut=lambda: broken.append("cut"))
    assert broken == ["cut"]


@pytest.mark.parametrize(
    ("text", "said"), [("nowhere=kill", "unknown failpoint"), ("mid_keep=burn", "unknown kind")]
)
def test_a_point_or_kind_nobody_knows_is_refused(text: str, said: str) -> None:
    with pytest.raises(ValueError, match=said):
        failpoints.arm(text)


def test_the_environment_arms_a_point_that_kills() -> None:
    code = "from recon import failpoints as f; f.arm_from_environment(); f.reach('after_claim')"
    ended = subprocess.run(
        [sys.executable, "-c", code], env={failpoints.VARIABLE: "after_claim=kill"}, check=False
    )
    assert ended.returncode == -9
