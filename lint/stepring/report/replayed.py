"""What a replay says: a few lines for each witness, and a sentence on all."""

from collections.abc import Iterator, Sequence

from stepring.replaying import Ended, Judged
from stepring.report.text import one_sentence, printable, shown_path
from stepring.report.words import count

_PROGRAM_WORDS: dict[Ended, str] = {
    "stopped": "stopped at the line",
    "did not stop": "did not stop at the line",
    "not possible": "not possible",
    "not tried": "not tried",
}


def replay_lines(number: int, one: Judged) -> Iterator[str]:
    """The lines on one witness: its finding, then how it went in the interpreter and as a program."""
    claim = one.claim
    yield printable(f"{number}. {claim.rule}, {claim.file}, line {claim.line}")
    yield from _row("Finding", one_sentence(claim.text))
    yield from _row("Interpreter", f"{'replayed' if one.held else 'not replayed'}: {one_sentence(one.why)}")
    if one.ended != "not tried":
        words = _PROGRAM_WORDS[one.ended]
        yield from _row("Program", f"{words}: {one_sentence(one.program_why)}" if one.program_why else words)
    if one.kept is not None:
        yield from _row("Kept", shown_path(str(one.kept)))
    yield ""


def _row(label: str, text: str) -> Iterator[str]:
    yield f"   {label:<11}  {printable(text)}"


def replay_summary(judged: Sequence[Judged]) -> str:
    """How many witnesses were replayed, and what the programs did."""
    held = sum(one.held for one in judged)
    parts = [f"{count(len(judged), 'witness', 'witnesses')}: {held} replayed in the interpreter"]
    tried = [(words, sum(one.ended == ended for one in judged)) for ended, words in _PROGRAM_WORDS.items()]
    if any(one.ended != "not tried" for one in judged):
        said = ", ".join(f"{number} {words}" for words, number in tried if number)
        parts.append(f"as programs {said}")
    return "; ".join(parts) + "."
