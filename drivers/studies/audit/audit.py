"""All checks of a routine."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

from drivers.point import ControlError, ResponseError
from drivers.studies.audit import accuracy, extremes, invariance, memory, tangent
from drivers.studies.audit.subject import CheckResult, Subject

__all__ = ["CHECKS", "AuditResult", "audit"]

CHECKS: dict[str, Callable[[Subject], CheckResult]] = {
    "relaxation": accuracy.relaxation,
    "path": accuracy.path,
    "order": accuracy.order,
    "tangent": tangent.tangent,
    "tangent-symmetry": tangent.tangent_symmetry,
    "repeatable": memory.repeatable,
    "restart": memory.restart,
    "two-points": memory.two_points,
    "zero-increment": extremes.zero_increment,
    "long-increment": extremes.long_increment,
    "isotropy": invariance.isotropy,
    "dissipation": invariance.dissipation,
    "temperature-jump": extremes.temperature_jump,
}


@dataclass(frozen=True, slots=True, kw_only=True)
class AuditResult:
    """What all checks found."""

    checks: tuple[CheckResult, ...]

    @property
    def holds(self) -> bool:
        """Whether every check holds."""
        return all(check.holds for check in self.checks)


def audit(
    subject: Subject,
    *,
    failed: Callable[[Exception], CheckResult | None] = lambda error: None,
    progress: Callable[[int], None] | None = None,
) -> AuditResult:
    """Run every check; a routine that fails inside one fails that check, and the next goes on.

    Parameters
    ----------
    subject : Subject
    failed : callable, optional
        Makes a result of an error that a foreign routine raised; None for one that is not the routine's. Its id is the check's.
    progress : callable, optional
        Called with 1 after each check.

    Returns
    -------
    AuditResult
    """
    results = []
    for name, check in CHECKS.items():
        try:
            result = check(subject)
        except (ControlError, ResponseError) as error:
            message = f"{str(error)[0].upper()}{str(error)[1:]}."
            result = CheckResult(id=name, holds=False, measured=None, limit=None, message=message)
        except Exception as error:
            made = failed(error)
            if made is None:
                raise
            result = CheckResult(
                id=name, holds=False, measured=None, limit=None, message=made.message, replay=made.replay
            )
        results.append(result)
        if progress is not None:
            progress(1)
    return AuditResult(checks=tuple(results))
