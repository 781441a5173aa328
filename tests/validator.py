"""The validator of the SARIF standard's own editors, run over logs, and what it said.

``python tests/validator.py PROGRAM FOLDER``: makes logs (the corpus, the tests' sample, both with every verdict) in
FOLDER, runs PROGRAM (the npm package ``@microsoft/sarif-multitool-linux``) over them, and fails if it says more than
it should.

Its exit code tells nothing, and a log that it cannot deserialise it passes in silence. So its results are read from
the file that it writes, and for each log the note SARIF2013 must be there, which every log without embedded file
contents gets: where it is missing, the log was not looked at. SARIF2006 says that an address could not be reached, as
is usual without a network; SARIF2003 that no version control is named, which is allowed where the tree is in no
checkout with a web address.
"""

import json
import os
import subprocess
import sys
from collections import defaultdict
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any
from urllib.parse import unquote, urlsplit

TESTS = Path(__file__).resolve().parent
CANARY = "SARIF2013"
ALLOWED = {CANARY, "SARIF2006"}
WITHOUT_CHECKOUT = "SARIF2003"


def run_validator(program: Path, logs: Sequence[Path], output: Path) -> Mapping[str, Any]:
    """Let the validator read the logs; gives the log of its own findings."""
    environment = {**os.environ, "DOTNET_SYSTEM_GLOBALIZATION_INVARIANT": "1"}
    options = ["--level", "Error;Warning;Note", "--output", str(output), "--log", "ForceOverwrite"]
    command = [str(program), "validate", *map(str, logs), *options]
    ended = subprocess.run(command, env=environment, capture_output=True, text=True, check=False, timeout=600)
    if ended.returncode or not output.exists():
        raise SystemExit(f"The validator did not work:\n{ended.stdout}\n{ended.stderr}")
    found: Mapping[str, Any] = json.loads(output.read_text(encoding="utf-8-sig"))
    return found


def said_of_each(found: Mapping[str, Any], logs: Sequence[Path]) -> Mapping[Path, Mapping[str, list[str]]]:
    """For each log the messages by the validator's rule."""
    said: dict[Path, dict[str, list[str]]] = {log.resolve(): defaultdict(list) for log in logs}
    for run in found["runs"]:
        for result in run.get("results", []):
            said[_target(result, run)][result["ruleId"]].append(_text(result))
    return said


def _target(result: Mapping[str, Any], run: Mapping[str, Any]) -> Path:
    location = result["locations"][0]["physicalLocation"]["artifactLocation"]
    if "uri" not in location:
        location = run["artifacts"][location["index"]]["location"]
    return Path(unquote(urlsplit(location["uri"]).path)).resolve()


def _text(result: Mapping[str, Any]) -> str:
    message = result["message"]
    return str(message.get("text") or message.get("arguments"))[:300]


def complaints(found: Mapping[str, Any], logs: Sequence[Path]) -> Iterator[str]:
    """What the validator said that it should not have, and logs that it did not look at."""
    for log, said in said_of_each(found, logs).items():
        if CANARY not in said:
            yield f"{log.name}: it was not looked at, for {CANARY} is missing."
        runs = json.loads(log.read_text(encoding="utf-8"))["runs"]
        in_checkout = any("versionControlProvenance" in run for run in runs)
        allowed = ALLOWED if in_checkout else ALLOWED | {WITHOUT_CHECKOUT}
        for rule, texts in sorted(said.items()):
            if rule not in allowed:
                yield from (f"{log.name}: {rule}: {text}" for text in texts)


def make_logs(folder: Path) -> list[Path]:
    """Logs of each corpus folder, and of the tests' sample outcome in a checkout."""
    folder.mkdir(parents=True, exist_ok=True)
    made = []
    for tree in sorted(path for path in (TESTS.parent / "corpus").iterdir() if path.is_dir()):
        made.append(folder / f"{tree.name}.sarif")
        command = [sys.executable, "-m", "stepring", "inspect", str(tree), "--kind", "fail,open,review,pass"]
        ended = subprocess.run([*command, "--report", "none", "--sarif", str(made[-1])], check=False)
        if ended.returncode not in (0, 1):
            raise SystemExit(f"{tree.name} could not be inspected.")
    made.append(folder / "sample.sarif")
    made[-1].write_bytes(_sample(folder / "sample"))
    return made


def _sample(root: Path) -> bytes:
    sys.path.insert(0, str(TESTS / "report"))
    from report_samples import barge

    from stepring.report.sarif import sarif_log
    from stepring.report.serialise import to_bytes

    (root / ".git").mkdir(parents=True, exist_ok=True)
    (root / ".git" / "HEAD").write_text("ref: refs/heads/main\n")
    (root / ".git" / "config").write_text('[remote "origin"]\n\turl = https://git.example/barge.git\n')
    return to_bytes(sarif_log(barge(root), ("fail", "open", "review", "pass"), 1))


def broken(log: Path) -> Path:
    """A copy of a log with a word that makes the validator pass it in silence."""
    text = log.read_text(encoding="utf-8").replace('"level": "error"', '"level": "fatal"', 1)
    copy = log.with_name("broken.sarif")
    copy.write_text(text, encoding="utf-8")
    return copy


def main(program: Path, folder: Path) -> int:
    """Make the logs, judge them, and make sure that a broken one is noticed."""
    logs = make_logs(folder)
    wrong = list(complaints(run_validator(program, logs, folder / "validator.out"), logs))
    seeded = broken(logs[-1])
    if not list(complaints(run_validator(program, [seeded], folder / "broken.out"), [seeded])):
        wrong.append("A log with an unknown level was not noticed.")
    for sentence in wrong:
        print(sentence)
    print(f"The standard's validator read {len(logs)} logs; complaints: {len(wrong)}.")
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main(Path(sys.argv[1]).resolve(), Path(sys.argv[2]).resolve()))
