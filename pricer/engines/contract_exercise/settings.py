"""How much work an interval for early exercise may take."""

from __future__ import annotations

from dataclasses import dataclass, field

from pricer.engines.early_exercise.certificate import CertificateSettings
from pricer.engines.early_exercise.fitting import FitSettings


@dataclass(frozen=True, slots=True)
class ExerciseSettings:
    """``gap`` : width asked of the interval, relative to the value; the error asked of the value counts if larger.

    A round without success doubles what it lacked, at most ``rounds`` in all. ``threads`` of one trade.
    ``american_days`` : an odd number of days looked at where exercise is possible on any; every other one of them is
    looked at alone to see what that costs, which must be a part of them.
    ``deltas`` and ``american_deltas`` : paths on which the fitted rule is differentiated.
    """

    gap: float = 1e-3
    rounds: int = 3
    threads: int = 1
    american_days: int = 45
    fit: FitSettings = field(default_factory=lambda: FitSettings(blocks=8, points=512, inner=128))
    certificate: CertificateSettings = field(default_factory=lambda: CertificateSettings(16, 128, 256))
    american_fit: FitSettings = field(default_factory=lambda: FitSettings(blocks=8, points=512, inner=16, degree=2))
    american_certificate: CertificateSettings = field(default_factory=lambda: CertificateSettings(16, 128, 128))
    deltas: CertificateSettings = field(default_factory=lambda: CertificateSettings(16, 128, 64))
    american_deltas: CertificateSettings = field(default_factory=lambda: CertificateSettings(16, 128, 32))

    def __post_init__(self) -> None:
        if self.american_days < 5 or self.american_days % 2 == 0:
            raise ValueError(f"an odd number of days from 5 on can be halved; got {self.american_days}")
