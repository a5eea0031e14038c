"""Reading a study file: TOML to a checked :class:`Study`, errors with file, line and remedy."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

from pydantic import BaseModel, ValidationError

from bayeslca.exceptions import ModelError, StatementError, StudyError, near_names
from bayeslca.model.answered_together import AnsweredTogether
from bayeslca.model.latent_class_model import LatentClassModel
from bayeslca.model.statements.resolve import read_statements
from bayeslca.model.statements.vocabulary import Vocabulary
from bayeslca.responses.item import ItemSpec
from bayeslca.responses.responses import Responses
from bayeslca.study.schema import SourcedStatement, StudyFile

Place = tuple[str | int, ...]
_KINDS = ("str", "int", "SourcedStatement", "list[str]", "TogetherSection", "list[float]", "float")
_KINDS_WITH_DETAIL = ("literal[", "dict[", "list[")
"""What pydantic puts into the place of an error, and the file does not have."""
_EXPECTED = {
    "list_type": "a list: [..., ...]",
    "dict_type": "a table: { name = ... }",
    "model_type": "a table: { key = ... }",
    "bool_type": "true or false",
    "string_type": 'a text (string) in quotes: "..."',
    "int_type": "a whole number",
    "int_parsing": "a whole number",
    "int_from_float": "a whole number",
    "float_type": "a number",
    "float_parsing": "a number",
}
"""What the file should hold, in its own words, by pydantic's kind of error."""
_OTHER_FORM = {*_EXPECTED, "literal_error"}


@dataclass(frozen=True)
class Study:
    """A study file that was read and checked.

    Attributes
    ----------
    path : Path
        The file; relative paths inside it are relative to its folder.
    text : str
        Its text, kept with the results.
    said : StudyFile
        What it says, section by section.
    """

    path: Path
    text: str
    said: StudyFile

    @cached_property
    def responses(self) -> Responses:
        """The answers, read as the study says."""
        answers = self.said.answers
        return Responses.read(
            self.path.parent / answers.file,
            items=[self._item_spec(name) for name in answers.items],
            case=answers.case,
            group=answers.group,
            counts=answers.count,
            keep_only=answers.keep_only or None,
            no_answer=tuple(answers.no_answer),
            sheet=answers.sheet,
            header_row=answers.header_row,
            encoding=answers.encoding,
            separator=answers.separator,
            weight=answers.weight,
            cluster=answers.cluster,
            stratum=answers.stratum,
            merge_lone_strata=answers.merge_lone_strata,
        )

    def _item_spec(self, name: str) -> ItemSpec:
        said = self.said.items.get(name)
        if said is None:
            return ItemSpec(name)
        return ItemSpec(
            name,
            categories=tuple(said.categories) if said.categories else None,
            label=said.label,
            ordered=said.ordered,
            yes=said.yes,
            merge={kept: tuple(others) for kept, others in said.merge.items()},
            no_answer=tuple(said.no_answer),
        )

    @property
    def free_by_group(self) -> bool | tuple[str, ...]:
        """Items whose response probabilities differ by group."""
        free = self.said.model.free_by_group
        return free if isinstance(free, bool) else tuple(free)

    def pooling(self, n_classes: int) -> dict[str, Any]:
        """Return how a model of so many classes pools its units: with one class not at all."""
        said = self.said.model
        if not said.pooled or n_classes == 1:
            return {}
        return {"pooled": True, "spread_prior": said.spread_prior}

    @property
    def statements(self) -> tuple[str, ...]:
        """The model's statements as text."""
        return tuple(
            said.statement if isinstance(said, SourcedStatement) else said
            for said in self.said.model.statements
        )

    @property
    def statement_sources(self) -> Mapping[str, str]:
        """Where statements come from, for those that say so."""
        return {
            said.statement: said.source
            for said in self.said.model.statements
            if isinstance(said, SourcedStatement)
        }

    @property
    def answered_together(self) -> tuple[AnsweredTogether, ...]:
        """Items that are answered together within a class."""
        return tuple(
            AnsweredTogether(tuple(said))
            if isinstance(said, list)
            else AnsweredTogether(
                tuple(said.items),
                None if said.classes is None else tuple(said.classes),
                tuple(said.prior) if isinstance(said.prior, list) else said.prior,
            )
            for said in self.said.model.answered_together
        )

    @property
    def shared_together(self) -> tuple[AnsweredTogether, ...]:
        """Those that hold in every class, and so for any number of classes."""
        return tuple(one for one in self.answered_together if one.classes is None)

    @cached_property
    def model(self) -> LatentClassModel | None:
        """The study's own model; None when the number of classes is left open."""
        classes = self.said.model.classes
        if classes is None:
            self._refuse_open_statements()
            return None
        responses = self.responses
        try:
            return LatentClassModel(
                responses.items,
                classes if isinstance(classes, int) else tuple(classes),
                statements=self.statements,
                groups=responses.groups,
                statement_sources=self.statement_sources,
                free_by_group=self.free_by_group,
                **self.pooling(classes if isinstance(classes, int) else len(classes)),
                answered_together=self.answered_together,
            )
        except StatementError as error:
            problem = f"{self._where_stated(error.statement)}: {error.problem}"
            raise StatementError(
                problem,
                statement=error.statement,
                position=error.position,
                remedy=error.remedy,
            ) from None
        except ModelError as error:
            msg = f"{_where(self.path, self.text, ('model',))}: {error}"
            raise ModelError(msg) from None

    def _where_stated(self, statement: str) -> str:
        """Say in which line of the file a statement stands, as far as that can be found."""
        for number, line in enumerate(self.text.splitlines(), start=1):
            if statement in line:
                return f"{self.path.name}, line {number}"
        return _where(self.path, self.text, ("model", "statements"))

    def _refuse_open_statements(self) -> None:
        """Statements about named classes need the classes."""
        open_statements = [text for text in self.statements if text not in self.shared_statements]
        if open_statements:
            msg = (
                f"{_where(self.path, self.text, ('model', 'statements'))}: {open_statements[0]!r} "
                "cannot be read for classes that have no names, and [model] classes is left out. "
                "Name the classes, or write statements about all classes: P(item=answer | .)."
            )
            raise StudyError(msg)
        named = [name for one in self.answered_together for name in one.classes or ()]
        if named:
            msg = (
                f"{_where(self.path, self.text, ('model', 'answered_together'))}: names the class "
                f"{named[0]!r}, and [model] classes is left out. Name the classes, "
                "or leave classes out of answered_together."
            )
            raise StudyError(msg)

    @property
    def sampling_options(self) -> dict[str, Any]:
        """Options of ``model.sample`` other than the seed."""
        said = self.said.sampling
        options: dict[str, Any] = {
            "sampler": said.sampler,
            "chains": said.chains,
            "draws": said.draws,
            "ess": said.ess,
            "r_hat": said.r_hat,
        }
        if said.max_sweeps is not None:
            options["max_sweeps"] = said.max_sweeps
        return options

    @cached_property
    def shared_statements(self) -> tuple[str, ...]:
        """Statements that speak of all classes alike, and so hold for any number of classes."""
        any_classes = Vocabulary(self.responses.items, ("1",), self.responses.groups, True)
        return tuple(text for text in self.statements if _can_be_read(text, any_classes))


def load_study(path: str | Path) -> Study:
    """Read and check a study file.

    Parameters
    ----------
    path : str or Path
        The TOML file.

    Raises
    ------
    StudyError
        When the file cannot be found or read, is not TOML, or says something unknown or wrong;
        the message names file, line and key, and what to do.
    """
    path = Path(path)
    text = _read_text(path)
    try:
        content = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        msg = f"{path.name}: not valid TOML: {error}. Text needs quotes, and each key stands once."
        raise StudyError(msg) from None
    try:
        said = StudyFile.model_validate(content)
    except ValidationError as error:
        raise StudyError(_in_words(path, text, error)) from None
    return Study(path, text, said)


def _read_text(path: Path) -> str:
    if path.is_dir():
        msg = f"{path.name} is a folder; name the study file in it, such as {path.name}/study.toml."
        raise StudyError(msg)
    try:
        return path.read_text(encoding="utf-8-sig")
    except FileNotFoundError:
        there = [other.name for other in path.parent.glob("*.toml")] if path.parent.is_dir() else []
        msg = (
            f"{path}: no such study file{near_names(path.name, there, likeness=0.75)}. "
            "`bayeslca draft DATA -o study.toml` writes a first one."
        )
        raise StudyError(msg) from None
    except (UnicodeDecodeError, OSError) as error:
        msg = f"{path}: cannot be read as UTF-8 text ({error}). Save the study file as UTF-8."
        raise StudyError(msg) from None


def _can_be_read(statement: str, vocabulary: Vocabulary) -> bool:
    try:
        read_statements((statement,), vocabulary)
    except StatementError:
        return False
    return True


def _in_words(path: Path, text: str, error: ValidationError) -> str:
    problems = [_problem(path, text, one) for one in _told_once(error.errors())]
    more = f" (and {len(problems) - 1} more: {'; '.join(problems[1:4])})" if problems[1:] else ""
    return problems[0] + more


def _place(one: Mapping[str, Any]) -> Place:
    return tuple(
        part
        for part in one["loc"]
        if part not in _KINDS and not str(part).startswith(_KINDS_WITH_DETAIL)
    )


def _told_once(errors: Iterable[Any]) -> list[dict[str, Any]]:
    """Join what pydantic says of each form that a key may have; the form that fits best speaks.

    A key of two forms (a list or a table) gives an error for each. One that got further into the
    value says more than "this is no list"; errors of one place are joined by "or".
    """
    found: dict[Place, dict[str, Any]] = {}
    places = [_place(one) for one in errors]
    for place, one in zip(places, errors, strict=True):
        expected = _EXPECTED.get(one["type"], str(one["msg"]).removeprefix("Input should be "))
        deeper = any(len(other) > len(place) and other[: len(place)] == place for other in places)
        if deeper and one["type"] in _OTHER_FORM:
            continue
        if place not in found:
            found[place] = {**one, "expected": expected}
        elif expected not in found[place]["expected"]:
            found[place]["expected"] += f" or {expected}"
    return list(found.values())


def _problem(path: Path, text: str, one: Mapping[str, Any]) -> str:
    place = _place(one)
    where = _where(path, text, place)
    kind = one["type"]
    if kind == "extra_forbidden":
        known = _known_keys(place[:-1])
        return (
            f"{where}: unknown key {place[-1]!r}{near_names(str(place[-1]), known)}. "
            f"Known here: {', '.join(known)}."
        )
    if kind == "missing":
        return f"{where}: is missing, and a study cannot do without it. Add {place[-1]} = ..."
    if kind == "value_error":
        return f"{where}: {one['ctx']['error']}."
    if kind == "list_type" and isinstance(one["input"], dict):
        return f"{where}: is a list of sections: write it as [[{place[-1]}]], once for each"
    if kind in ("model_type", "model_attributes_type") and isinstance(one["input"], list):
        return f"{where}: stands once: write it as [{place[-1]}], not [[{place[-1]}]]"
    return f"{where}: found {one['input']!r}; should be {one['expected']}."


def _known_keys(place: Place) -> list[str]:
    """List the keys that a section takes, found by walking the schema."""
    section: Any = StudyFile
    for part in place:
        if section is None:
            return []
        if isinstance(part, str) and part in section.model_fields:
            annotation = section.model_fields[part].annotation
            section = _section_of(annotation)
    return list(section.model_fields) if section is not None else []


def _section_of(annotation: Any) -> type[BaseModel] | None:
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    for inner in getattr(annotation, "__args__", ()):
        found = _section_of(inner)
        if found is not None:
            return found
    return None


def _where(path: Path, text: str, place: Place) -> str:
    names = [str(part) for part in place if isinstance(part, str)]
    line = _line_of(text, names)
    at_line = f", line {line}" if line else ""
    if len(names) > 1:
        key = f", [{'.'.join(names[:-1])}] {names[-1]}"
    else:
        key = f", {names[0]}" if names else ""
    item = "".join(f", entry {part + 1}" for part in place if isinstance(part, int))
    return f"{path.name}{at_line}{key}{item}"


def _line_of(text: str, names: list[str]) -> int | None:
    """Find the line of a key, or of its section when the key is not there."""
    if not names:
        return None
    lines = text.splitlines()
    for depth in range(len(names), 0, -1):
        header = re.compile(r"\s*\[+\s*" + r"\s*\.\s*".join(map(_key, names[:depth])) + r"\s*\]")
        for number, line in enumerate(lines, start=1):
            if header.match(line):
                return _line_in_section(lines, number, names[depth:]) or number
    return None


def _line_in_section(lines: list[str], start: int, rest: list[str]) -> int | None:
    if not rest:
        return None
    key = re.compile(r"\s*" + _key(rest[0]) + r"\s*[=.]")
    for number in range(start, len(lines)):
        if lines[number].lstrip().startswith("["):
            return None
        if key.match(lines[number]):
            return number + 1
    return None


def _key(name: str) -> str:
    return rf"[\"']?{re.escape(name)}[\"']?"
