"""The names a user types in a project file, with what they mean: the only home of the format's vocabulary.

Values stay text with a place; their meaning (numbers, units, formulas) is read elsewhere.  A text or
table that was already reported is replaced by an absent one, which every rule here lets pass.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Annotated, Any, Final, Literal, get_args

from pydantic import AfterValidator, BaseModel, ConfigDict, Discriminator, Field, GetPydanticSchema, Tag
from pydantic_core import PydanticCustomError, core_schema

from dossier.project.located import Items, Table, Text

FORMAT: Final = "1"
Time = Literal["continuous", "sampled"]
Role = Literal["command", "measurement", "internal"]
TIMES: Final[tuple[str, ...]] = get_args(Time)
ROLES: Final[tuple[Role, ...]] = get_args(Role)
SCOPES: Final = ("nominal", "tolerances")
SIGNATURES: Final = ("prepared", "checked", "independently_reviewed", "approved", "accepted")
CLAIMS: Final = (
    "existence", "equilibria_listed", "equilibrium_value", "asymptotic_stability", "exponential_stability",
    "attraction", "global_attraction", "limits_kept", "excursion", "decay_rate", "damping_ratio", "contraction",
    "settling_time", "gain_margin", "phase_margin", "delay_margin", "peak_sensitivity", "parameter_margin",
    "invariance", "ultimate_bound",
)  # fmt: skip


def _text_schema(check: Callable[[Text], None], json: dict[str, Any]) -> GetPydanticSchema:
    def validate(value: Any) -> Text:
        if not isinstance(value, Text):
            raise PydanticCustomError("text_expected", "a table or list stands where one value is expected")
        if not value.is_absent:
            check(value)
        return value

    function = core_schema.no_info_plain_validator_function(
        validate, metadata={"pydantic_js_functions": [lambda _schema, _handler: dict(json)]}
    )
    return GetPydanticSchema(lambda _source, _handler: function)


def _choice(*values: str) -> GetPydanticSchema:
    def check(value: Text) -> None:
        if value not in values:
            raise PydanticCustomError("choice", "not one of the words allowed here", {"choices": values})

    return _text_schema(check, {"enum": list(values)})


def _flag(value: Text) -> None:
    if value not in ("true", "false"):
        raise PydanticCustomError("choice", "not one of the words allowed here", {"choices": ("true", "false")})


Plain = Annotated[Text, _text_schema(lambda _value: None, {"type": ["string", "number"]})]
Flag = Annotated[Text, _text_schema(_flag, {"enum": [True, False]})]


def _keep(kind: type) -> Any:
    """Validation that keeps the located table or list itself, so that its place is not lost."""

    def validate(value: Any, handler: Any) -> Any:
        if not isinstance(value, kind):
            raise PydanticCustomError(
                "table_expected" if kind is Table else "items_expected", "another kind of value is expected here"
            )
        checked = handler(value)
        result = kind(checked)
        result.line, result.column, result.is_absent = value.line, value.column, value.is_absent
        result.file = value.file
        return result

    def schema(source: Any, handler: Any) -> core_schema.CoreSchema:
        return core_schema.no_info_wrap_validator_function(validate, handler(source))

    return GetPydanticSchema(schema)


def _two(value: Items) -> Items:
    if len(value) != 2:  # noqa: PLR2004 - a lower and an upper bound
        raise PydanticCustomError("pair_expected", "two values are expected")
    return value


Pair = Annotated[
    list[Plain], _keep(Items), AfterValidator(_two), Field(json_schema_extra={"minItems": 2, "maxItems": 2})
]
Words = Annotated[list[Plain], _keep(Items)]
Values = Annotated[dict[Plain, Plain], _keep(Table)]
Sides = Annotated[dict[Plain, Pair], _keep(Table)]


class Entry(BaseModel):
    """A table with fixed keys."""

    model_config = ConfigDict(extra="forbid", arbitrary_types_allowed=True)


def _kind(value: Any) -> str:
    return "table" if isinstance(value, dict) else "plain"


class Signature(Entry):
    """One row of the sign-off block."""

    name: Plain | None = Field(None, description="who signs; may stay empty until signing")
    role: Plain | None = Field(None, description="job or duty of the person")


class SignOff(Entry):
    """The sign-off block."""

    prepared: Signature | None = Field(None, description="who prepared the dossier")
    checked: Signature | None = Field(None, description="who checked it")
    independently_reviewed: Signature | None = Field(None, description="an independent reviewer")
    approved: Signature | None = Field(None, description="who approved it")
    accepted: Signature | None = Field(None, description="who accepted it on the customer's side")


class DocumentEntry(Entry):
    """Title-block data, named after ISO 7200 where they fit."""

    number: Plain = Field(description="document number")
    title: Plain = Field(description="title of the document")
    revision: Plain = Field(description="revision letter or number")
    date: Plain = Field(description="date of issue, year-month-day; stated, never taken from the clock")
    machine: Plain = Field(description="the machine")
    organisation: Plain = Field(description="who issues the document")
    sign_off: SignOff | None = Field(None, description="who signs")
    scope: Plain | None = Field(None, description="what the dossier covers, and what it does not")
    standards: Words | None = Field(None, description="standards named as applicable; not assessed here")


class AssumptionEntry(Entry):
    """One row of the assumption register."""

    text: Plain = Field(description="the assumption as a sentence")
    basis: Plain = Field(description="where it comes from")
    covers: Words = Field(description="models, operating points or criteria it is about")
    kind: Plain | None = Field(None, description="such as modelling, operation, environment")
    owner: Plain | None = Field(None, description="who is responsible for it")
    state: Plain | None = Field(None, description="such as open or accepted")
    kept_by: Plain | None = Field(None, description="what keeps it true on the machine")


class StateEntry(Entry):
    """A state variable."""

    unit: Plain = Field(description='unit of plain numbers about it; "1" if dimensionless')
    meaning: Plain | None = Field(None, description="what it is on the machine")


class ParameterEntry(Entry):
    """A constant of the model."""

    value: Plain = Field(description="nominal value, plain or with a unit")
    unit: Plain = Field(description="unit of plain numbers about it")
    tolerance: Plain | None = Field(None, description="half width of the production spread, relative (3 %) or absolute")
    range: Pair | None = Field(None, description="least and greatest value in use")
    varies: Flag | None = Field(None, description="true: it may change within its range during a motion")
    meaning: Plain | None = Field(None, description="what it is on the machine")
    source: Plain | None = Field(None, description="where the value comes from")


class SignalEntry(Entry):
    """A named intermediate expression."""

    is_: Plain = Field(alias="is", description="its formula")
    unit: Plain = Field(description="its unit")
    role: Annotated[Text, _choice(*ROLES)] | None = Field(None, description="command, measurement or internal")
    limits: Pair | None = Field(None, description="bounds it may not leave")
    meaning: Plain | None = Field(None, description="what it is on the machine")


class DisturbanceEntry(Entry):
    """A bounded input, otherwise arbitrary in time."""

    unit: Plain = Field(description="its unit")
    range: Pair = Field(description="its bounds; 0 lies between them")
    meaning: Plain | None = Field(None, description="what it is on the machine")


class ModelEntry(Entry):
    """A closed loop."""

    title: Plain = Field(description="what is modelled")
    basis: Plain = Field(description="where the equations come from")
    time: Annotated[Text, _choice(*TIMES)] = Field(
        description="continuous, or sampled (equations give the next sample)"
    )
    sample_interval: Plain | None = Field(None, description="sampled models: the parameter that is the interval")
    states: Annotated[dict[Plain, StateEntry], _keep(Table)] = Field(description="state variables in order")
    parameters: Annotated[dict[Plain, ParameterEntry], _keep(Table)] | None = Field(None, description="constants")
    signals: Annotated[dict[Plain, SignalEntry], _keep(Table)] | None = Field(None, description="named expressions")
    disturbances: Annotated[dict[Plain, DisturbanceEntry], _keep(Table)] | None = Field(
        None, description="bounded inputs"
    )
    equations: Values = Field(description="per state its rate of change, or its next sample")
    domain: Sides | None = Field(None, description="where the model is valid (absolute); nothing is claimed outside")


class SetEntry(Entry):
    """A parameter set for one operating point, with a spread."""

    value: Plain = Field(description="value at this point")
    range: Pair | None = Field(None, description="least and greatest value")
    tolerance: Plain | None = Field(None, description="half width, relative or absolute")


class EquilibriumEntry(Entry):
    """Which equilibrium is meant: one of the three."""

    at: Values | None = Field(None, description="the equilibrium itself, the same for every combination")
    near: Values | None = Field(None, description="the equilibrium nearest to this")
    none_expected: Flag | None = Field(None, description="true: no equilibrium is expected")


class CandidateEntry(Entry):
    """A Lyapunov function of the engineer's own."""

    function: Plain = Field(description="V of the offsets: a formula in the states, as numbers in their units")
    level: Plain = Field(description="the set is V <= level; a plain number")


class CriterionEntry(Entry):
    """What is asked for."""

    claim: Annotated[Text, _choice(*CLAIMS)] = Field(description="the property")
    over: Annotated[Text, _choice(*SCOPES)] | None = Field(None, description="nominal, or every combination of spreads")
    region: Sides | None = Field(None, description="starts as offsets, in place of the operating point's")
    of: Plain | None = Field(None, description="a state, signal, formula or parameter")
    between: Pair | None = Field(None, description="both bounds")
    at_least: Plain | None = Field(None, description="lower bound")
    at_most: Plain | None = Field(None, description="upper bound")
    loop: Plain | None = Field(None, description="the command signal at which the loop is opened")
    under: Annotated[Text, _choice("disturbances")] | None = Field(None, description="disturbances act")
    to: Plain | None = Field(None, description="greatest distance from the equilibrium value after `within`")
    within: Plain | None = Field(None, description="time allowed")
    requirement: Plain | None = Field(None, description="id of the requirement served")
    hazard: Plain | None = Field(None, description="id of the hazard treated")


SetValue = Annotated[
    Annotated[Plain, Tag("plain")] | Annotated[SetEntry, Tag("table")],
    Discriminator(_kind),
]


class PointEntry(Entry):
    """One operating point and what is asked of it."""

    model: Plain = Field(description="name of the model")
    meaning: Plain | None = Field(None, description="the operating point in words")
    set: Annotated[dict[Plain, SetValue], _keep(Table)] | None = Field(None, description="parameters fixed here")
    equilibrium: EquilibriumEntry = Field(description="which equilibrium is meant")
    search: Sides | None = Field(None, description="where all equilibria are to be listed (absolute)")
    region: Sides | None = Field(None, description="starts, as offsets from the equilibrium")
    limits: Sides | None = Field(None, description="offsets that no motion from the region may leave")
    candidate: CandidateEntry | None = Field(None, description="the engineer's own V and level, judged as given")
    criteria: Annotated[dict[Plain, CriterionEntry], _keep(Table)] = Field(description="what is asked for")


class ProjectEntry(Entry):
    """A project file."""

    dossier: Annotated[Text, _choice(FORMAT)] = Field(description="format of the file")
    include: Words | None = Field(None, description="files in this folder that hold further models")
    document: DocumentEntry = Field(description="title-block data")
    assumptions: Annotated[dict[Plain, AssumptionEntry], _keep(Table)] | None = Field(
        None, description="the assumption register"
    )
    models: Annotated[dict[Plain, ModelEntry], _keep(Table)] = Field(description="closed loops")
    operating_points: Annotated[dict[Plain, PointEntry], _keep(Table)] = Field(description="where they are operated")


def json_schema() -> dict[str, Any]:
    """The format as a JSON Schema (draft 2020-12), for editors that check and complete while one types.

    It knows names, shapes and fixed words; units, formulas and references are checked by reading the file.
    """
    return {
        "$schema": "https://json-schema.org/draft/2020-12/schema",
        "title": "Project of a stability dossier",
        **{k: v for k, v in ProjectEntry.model_json_schema().items() if k != "title"},
    }
