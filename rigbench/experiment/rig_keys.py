"""The keys of sensing and timing: how the law meets the machine, in every condition of the matrix."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from rigbench.yamlfile import Declared

__all__ = ["SensingKeys", "TimingKeys"]


class SensingKeys(Declared):
    """What the law sees of the machine; scores always take the truth. Counts are in the arm file's drives."""

    encoder: Literal["motor", "link"] = Field(
        default="motor",
        description="side of an elastic joint on which its encoder sits; default motor (common practice)",
    )
    noise_deg: float = Field(
        default=0.0,
        ge=0,
        le=90,
        description="standard deviation of white noise on each sensed position [deg; mm for a prismatic "
        "joint], drawn anew at every control tick, so that every condition is random; default 0; "
        "typical: 0.001 (our choice)",
    )
    velocity_corner_hz: float | None = Field(
        default=None,
        gt=0,
        le=1e6,
        description="corner of the first-order filter on the difference of sensed positions [Hz]; default: "
        "100 where positions are counted or noisy (our choice), else exact velocities",
    )


class TimingKeys(Declared):
    """When the law is called, and when its torque acts."""

    delay_ms: float = Field(
        default=0.0,
        ge=0,
        le=1000,
        description="from the control tick to its torque, in whole and part steps of the engine [ms]; "
        "default 0; typical: one control period, for a torque that is worked out in one and given in the "
        "next (common practice)",
    )
    jitter_percent: float = Field(
        default=0.0,
        ge=0,
        le=100,
        description="share of the control period by which a tick may come late, uniformly, in whole steps of "
        "the engine [percent]; needs physics_hz above control_hz, and makes every condition random; "
        "default 0; typical: 10 (our choice)",
    )
    dropped_percent: float = Field(
        default=0.0,
        ge=0,
        lt=100,
        description="share of the control ticks that are skipped at random, the torque held on [percent]; "
        "makes every condition random; default 0; typical: 0.1 (our choice)",
    )
    model_late: bool = Field(
        default=False,
        description="true: the model term is handed on one model tick late, as if worked out beside the "
        "loop; default false",
    )
