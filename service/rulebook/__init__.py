"""The rule book: the catalogue's facts and the rules that run, read from files into frozen records.

Nothing is half-taken: a file that can't be used raises `BadInput` with file, line, entry and remedy, and
the book that was in use stays as it was.
"""

import tomllib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import replace
from datetime import datetime
from importlib.resources.abc import Traversable
from typing import Any, TypeVar

from pydantic import ValidationError

from rules.book import LIVE_MARKS, Book, Caution, Crop, Lookalike, Pest, Risk, Rule, Sourced, Threshold
from rules.digests import digest
from rules.records import Refusal
from service.errors import BadInput
from service.rulebook import lines, models
from service.shipped import shipped

M = TypeVar("M", bound=models.Shape)


def load(folder: Traversable | None = None) -> Book:
    """Read the whole catalogue: the shipped one, or one of the same layout elsewhere."""
    root = folder or shipped("catalogue")
    crops = {crop.id: crop for crop in _crops(root.joinpath("crops.toml"))}
    pests = {pest.id: pest for file in _files(root, "pests") for pest in [_pest(file, crops)]}
    cautions = tuple(_cautions(root.joinpath("cautions.toml")))
    rules = tuple(rule for file in _files(root, "rules") for rule in _rules(file, pests, crops))
    _no_double(rules)
    return Book(pests, crops, cautions, rules, digest([pests, crops, cautions]))


def with_versions(book: Book, versions: Sequence[Rule]) -> Book:
    """The book with newer versions of its rules in their places; rules it lacks are added at the end."""
    newer = {rule.id: rule for rule in versions}
    for rule in versions:
        _checked(rule)
    kept = [newer.pop(rule.id, rule) for rule in book.rules]
    return replace(book, rules=(*kept, *(newer[id] for id in sorted(newer))))


def revise(rule: Rule, changes: Mapping[str, Sourced], *, by: str, why: str, made_at: datetime) -> Rule:
    """The next version of a rule with some parameters changed, each with its mark and source."""
    values = {name: each.value for name, each in changes.items()}
    sources = {name: {"mark": each.mark, "source": each.source} for name, each in changes.items()}
    changed = replace(
        rule,
        version=rule.version + 1,
        parameters={**rule.parameters, **values},
        sources={**rule.sources, **sources},
        by=by,
        why=why,
        made_at=made_at,
    )
    return _checked(replace(changed, hash=rule_hash(changed)))


def rule_hash(rule: Rule) -> str:
    """The hash of what a rule says; who made a version, when and why leave it as it is."""
    said = (rule.id, rule.kind, rule.pest, rule.crops, rule.parameters, rule.sources, rule.wording)
    return digest(said)


# --- reading files -----------------------------------------------------------------------------


def _files(root: Traversable, folder: str) -> list[Traversable]:
    found = sorted(root.joinpath(folder).iterdir(), key=lambda file: file.name)
    return [file for file in found if file.name.endswith(".toml")]


def _read(file: Traversable) -> tuple[str, dict[str, Any]]:
    text = file.read_text(encoding="utf-8")
    try:
        return text, tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise BadInput(f"{file.name} can't be read as TOML: {error}; mend that line") from error


def _shape(file: Traversable, model: type[M]) -> tuple[str, M]:
    text, data = _read(file)
    try:
        return text, model.model_validate(data)
    except ValidationError as error:
        raise lines.refuse(file.name, lines.refusals(error, text)) from error


def _crops(file: Traversable) -> Iterator[Crop]:
    _, shape = _shape(file, models.Crops)
    for each in shape.crops:
        names = (each.name, *each.aliases)
        yield Crop(each.id, each.name, names, each.scale, tuple(each.stages), each.seedling_to, each.mark, each.source)


def _cautions(file: Traversable) -> Iterator[Caution]:
    _, shape = _shape(file, models.Cautions)
    for each in shape.cautions:
        yield Caution(each.id, each.text, tuple(each.when), each.mark, each.source)


def _pest(file: Traversable, crops: Mapping[str, Crop]) -> Pest:
    text, shape = _shape(file, models.PestShape)
    for table in ("risks", "thresholds"):
        for i, span in enumerate(getattr(shape, table)):
            _known(file, text, (table, i, "crops"), span.crops, crops)
    flags = ("edge_first", "night", "lifts_cover", "dry_soil_uninformative")
    sourced = ("damage", "where", "before_up", "method", "spots", "units_per_spot", "minutes", "relook_days")
    alike: dict[str, Any] = {name: getattr(shape, name).value for name in flags}
    alike |= {name: _sourced(getattr(shape, name)) for name in sourced}
    return Pest(
        id=shape.id,
        name=shape.names.one,
        plural=shape.names.many,
        scientific_names=tuple(shape.names.scientific),
        eppo=shape.eppo.value if shape.eppo else None,
        aliases=tuple(shape.names.aliases),
        lookalikes=tuple(Lookalike(**each.model_dump()) for each in shape.lookalikes),
        risks=tuple(Risk(crop=crop, **_without_crops(each)) for each in shape.risks for crop in each.crops),
        when=tuple(_sourced(each) for each in shape.when),
        unit=shape.unit.value,
        thresholds=tuple(
            Threshold(crop=crop, **_without_crops(each)) for each in shape.thresholds for crop in each.crops
        ),
        beneficials=_sourced(shape.beneficials),
        notes=tuple(_sourced(each) for each in shape.notes),
        **alike,
    )


def _sourced(value: models.Value[Any]) -> Sourced:
    return Sourced(value.value, value.mark, value.source)


def _without_crops(span: models.Span) -> dict[str, Any]:
    return span.model_dump(exclude={"crops"})


def _known(
    file: Traversable, text: str, entry: Sequence[str | int], given: Sequence[str], there_is: Mapping[str, Any]
) -> None:
    """Refuse a name that the catalogue does not hold."""
    for each in given:
        if each not in there_is:
            remedy = f"the catalogue has no {each!r}; it has: {', '.join(sorted(there_is))}"
            raise lines.refuse(file.name, [Refusal(lines.line_of(text, entry), lines.name(entry), each, remedy)])


# --- rules -------------------------------------------------------------------------------------


def _rules(file: Traversable, pests: Mapping[str, Pest], crops: Mapping[str, Crop]) -> Iterator[Rule]:
    text, shape = _shape(file, models.Rules)
    for i, each in enumerate(shape.rules):
        _known(file, text, ("rules", i, "pest"), [each.pest], pests)
        _known(file, text, ("rules", i, "crops"), each.crops, crops)
        try:
            parameters = _parameters(each.kind, each.parameters)
        except ValidationError as error:
            raise lines.refuse(file.name, lines.refusals(error, text, ("rules", i, "parameters"))) from error
        rule = _rule(each, parameters)
        remembered = _from_memory(rule)
        if remembered:
            entry = ("rules", i, "parameters", remembered)
            remedy = "a live rule may not rest on a number from memory (M); find its source, or make it an understudy"
            raise lines.refuse(file.name, [Refusal(lines.line_of(text, entry), lines.name(entry), "", remedy)])
        yield rule


def _parameters(kind: str, given: Mapping[str, Any]) -> dict[str, Any]:
    """Check a rule's parameters by the model of its kind; returns them as plain tables."""
    model = models.PARAMETERS.get(kind)
    if model is None:
        model = models.HATCH_FORMS[models.HatchForm.model_validate(dict(given)).form.value]
    return model.model_validate(dict(given)).model_dump()


def _rule(shape: models.RuleShape, parameters: Mapping[str, Any]) -> Rule:
    rule = Rule(
        id=shape.id,
        version=1,
        kind=shape.kind,
        pest=shape.pest,
        crops=tuple(shape.crops),
        parameters={name: each["value"] for name, each in parameters.items()},
        wording=shape.wording,
        status=shape.status,
        by=shape.by,
        why=shape.why,
        made_at=None,
        hash="",
        sources={name: {"mark": each["mark"], "source": each["source"]} for name, each in parameters.items()},
    )
    return replace(rule, hash=rule_hash(rule))


def _checked(rule: Rule) -> Rule:
    """A rule that was not read from a file, if its parameters may be used."""
    given = {name: {"value": value, **rule.sources.get(name, {})} for name, value in rule.parameters.items()}
    where = f"rule {rule.id} version {rule.version}"
    try:
        _parameters(rule.kind, given)
    except ValidationError as error:
        raise lines.refuse(where, lines.refusals(error, "", ("parameters",))) from error
    remembered = _from_memory(rule)
    if remembered:
        raise BadInput(f"{where}: {remembered} is from memory (M); a live rule needs a source or common practice")
    return rule


def _from_memory(rule: Rule) -> str | None:
    """The first parameter of a live rule that no reader may be shown."""
    if rule.status != "live":
        return None
    return next((name for name in sorted(rule.sources) if rule.sources[name]["mark"] not in LIVE_MARKS), None)


def _no_double(rules: Sequence[Rule]) -> None:
    names = [rule.id for rule in rules]
    double = sorted({name for name in names if names.count(name) > 1})
    if double:
        raise BadInput(f"the catalogue has two rules named {double[0]!r}; give one another id")
