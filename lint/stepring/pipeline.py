"""The whole inspection, from paths to an outcome."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from pathlib import Path

from stepring.report.types import Coverage, Outcome
from stepring.shapes.types import Program


@dataclass(frozen=True, slots=True)
class Options:
    """What the user asked for."""

    compile_commands: Path | None = None
    data_model: str | None = None
    jobs: int = 1
    compilers: tuple[str, ...] = ()
    use_compiler: bool = True


def inspect(
    paths: Sequence[Path], options: Options, progress: Callable[[int, int, str], None] | None = None
) -> Outcome:
    """Inspect the C below ``paths``."""
    return Outcome(Path.cwd(), (), Program((), ()), (), (), Coverage(0, 0, 0, 0), ())
