"""Reading a run file: a run that can be sampled, or everything that is wrong with the file."""

from __future__ import annotations

import os
import re
import tomllib
from typing import Any

from pairmc.errors import InputError, Problem
from pairmc.runfile.checks import check, check_run
from pairmc.runfile.lines import Path, key_lines
from pairmc.runfile.problems import Finding, value_in_words
from pairmc.runfile.run import RunFile, build_run
from pairmc.runfile.validate import validate

__all__ = ["RunFile", "read_run_file", "read_run_text"]

_LARGEST = 1_000_000  # bytes


def read_run_file(path: str | os.PathLike[str]) -> RunFile:
    """Read a run file.

    Parameters
    ----------
    path
        A TOML file.

    Returns
    -------
    RunFile
        The run, ready to be sampled.

    Raises
    ------
    InputError
        Where the file cannot be read, is not TOML, or describes no run that can be sampled; with
        every problem found, in the order of the file.
    """
    name = os.fspath(path)
    try:
        with open(name, "rb") as file:
            content = file.read(_LARGEST + 1)
    except (OSError, ValueError) as error:
        raise _unreadable(name, *_reason(error)) from None
    if len(content) > _LARGEST:
        raise _unreadable(name, f"more than {_LARGEST} bytes", "name a run file, a short text")
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        got = f"bytes on line {line} that are not UTF-8"
        raise _unreadable(name, got, "name a run file, saved as UTF-8", line) from None
    return read_run_text(text, name)


def read_run_text(text: str, path: str = "run file") -> RunFile:
    """Read a run from the text of its file.

    Parameters
    ----------
    text
        TOML.
    path
        What messages call it.

    Raises
    ------
    InputError
        As `read_run_file`.
    """
    content, lines = _parse(text, path)
    document, findings = validate(content)
    refused = {part for finding in findings for part in (finding.path, finding.meant) if part}
    findings += check(document, refused)
    _refuse(findings, lines, path)
    run = build_run(document, path, text)
    _refuse(list(check_run(run)), lines, path)
    return run


def _refuse(findings: list[Finding], lines: dict[Path, int], path: str) -> None:
    """Refuse all that was found at once, in the order of the file; nothing where it is nothing."""
    if findings:
        problems = [finding.problem(lines) for finding in findings]
        problems.sort(key=lambda problem: (problem.line is None, problem.line or 0))
        raise InputError(tuple(problems), path)


def _parse(text: str, path: str) -> tuple[dict[str, Any], dict[Path, int]]:
    """Return what a TOML text holds and the line of each of its keys."""
    try:
        return tomllib.loads(text), key_lines(text)
    except tomllib.TOMLDecodeError as error:
        problem = _syntax_problem(text, str(error))
    except RecursionError:
        problem = Problem("TOML", "brackets nested too deeply", "tables and short lists")
    except ValueError:  # the one other thing the TOML reader raises
        problem = Problem("TOML", "an integer of thousands of digits", "numbers of usual length")
    raise InputError(problem, path)


def _unreadable(name: str, got: str, advice: str, line: int | None = None) -> InputError:
    """Return the refusal of a whole file."""
    key = name if name.isprintable() and name else value_in_words(name)
    return InputError(Problem(key, got, "a run file in TOML", advice, line))


def _reason(error: Exception) -> tuple[str, str]:
    """Return why a file could not be opened or read, and what to do."""
    match error:
        case FileNotFoundError():
            return "no such file", "check the name"
        case IsADirectoryError():
            return "a folder", "name a run file in it"
        case PermissionError():
            return "a file that may not be read", "check its permissions"
        case OSError():
            return (error.strerror or "an unreadable file").lower(), "check the name"
    return "an impossible file name", "check the name"


def _syntax_problem(text: str, reason: str) -> Problem:
    """Word what the TOML reader stumbled over."""
    place = re.search(r" \(at (?:line (\d+), column \d+|end of document)\)$", reason)
    lines = text.split("\n")
    number = int(place[1]) if place and place[1] else len(lines)
    cause = reason[: place.start()] if place else reason
    got = lines[min(number, len(lines)) - 1].strip()
    advice = f"{cause[:1].lower()}{cause[1:]}"
    bare = re.match(r'[\w.-]+\s*=\s*([+-]?[0-9][0-9._eE+-]*\s*[/*A-Za-zµ][^"\']*)$', got)
    if bare:
        advice = f'put a number with a unit in quotes: "{bare[1].split("#")[0].strip()}"'
    words = {
        "Cannot overwrite a value": "the key is given twice; keep one",
        "Expected '=' after a key in a key/value pair": "write key = value",
    }
    return Problem(
        "TOML", value_in_words(got), "key = value, text in quotes", words.get(cause, advice), number
    )
