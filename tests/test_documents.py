from __future__ import annotations

import math
from pathlib import Path
from typing import Annotated, Any, Literal

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gmid.condition import Condition
from gmid.documents import (
    AUTO,
    CapacitanceDensity,
    CapacitancePerResistance,
    ConditionText,
    Count,
    Decibel,
    Degrees,
    Document,
    Field,
    Flag,
    Frequency,
    Length,
    Level,
    MatchingRatio,
    MatchingVoltage,
    Model,
    NoiseDensity,
    Parsed,
    PositiveVoltage,
    Ratio,
    Resistance,
    SlewRate,
    SupplyLevel,
    TemperatureC,
    Text,
    model_validator,
    parse_document,
    read_document,
)
from gmid.errors import DataFault, Faults, FileTrouble, GmidError, UnknownName


class Supply(Model):
    voltage: PositiveVoltage
    tolerance: Ratio = 0.1
    common_mode: SupplyLevel = Level(0.5, is_share=True)


class Axis(Model):
    source: Literal["name", "title"] = Field(alias="from")
    pattern: Text
    unit: Text = "m"


class Column(Model):
    column: Text
    unit: Text | None = None


class Sweep(Model):
    files: Text | tuple[Text, ...]
    axes: dict[str, str | Axis | Column] = Field(default_factory=dict)
    temperature: TemperatureC = 27.0
    fingers: Count = 1
    nominal: Flag = False


class Filter(Model):
    response: Literal["butterworth", "chebyshev", "bessel"]
    edge: Frequency
    order: Annotated[Count | None, AUTO]
    noise_band: tuple[Frequency, Frequency] | None = None
    lengths: Annotated[tuple[Length, ...] | None, AUTO] = None

    @model_validator(mode="after")
    def _check(self) -> Filter:
        if self.noise_band is not None and self.noise_band[0] >= self.noise_band[1]:
            raise DataFault("noise_band runs backwards.", hint="Give the lower end first.")
        return self


class Request(Model):
    title: Text = ""
    supply: Supply
    filter: Filter | None = None
    sweep: tuple[Sweep, ...] = ()
    conditions: tuple[ConditionText, ...] = ()


def told(text: str, model: type[Model] = Request, heading: str = "format = 1\n") -> list[str]:
    with pytest.raises(GmidError) as caught:
        parse_document(heading + text, model, name="r.toml")
    return str(caught.value).splitlines()


SUPPLY = "supply.voltage = 1.8\n"


def test_reads_a_document_into_si() -> None:
    document = parse_document(
        'format = 1\nconditions = ["tt/27", "ss/-40"]\n[supply]\nvoltage = "1.8 V"\n'
        'common_mode = "0.8 V"\n[filter]\nresponse = "bessel"\nedge = "400 kHz"\norder = "auto"\n'
        'noise_band = ["1 kHz", 4e5]\nlengths = ["0.3 um", 1e-6]\n[[sweep]]\nfiles = "*.txt"\n'
        '[sweep.axes]\nvgs = "v(g)"\nlength = { from = "name", pattern = "L" }\n'
        'vds = { column = "vds" }\n',
        Request,
        name="r.toml",
    )
    request = document.model
    assert request.conditions == (Condition("tt", 27.0), Condition("ss", -40.0))
    assert request.supply.common_mode == Level(0.8)
    assert request.filter is not None
    assert request.filter.order is None
    assert request.filter.noise_band == (1e3, 4e5)
    assert request.filter.lengths == (3e-7, 1e-6)
    assert request.sweep[0].axes["length"] == Axis(**{"from": "name", "pattern": "L"})  # type: ignore[arg-type]
    assert document.where("sweep", 0, "axes", "vgs") == "r.toml:15"
    assert document.where("supply", "tolerance") == "r.toml:3"
    assert document.data["conditions"] == ["tt/27", "ss/-40"]
    assert repr(document) == "Document('r.toml', Request)"
    fault = document.fault("is too low.", "filter", "edge", hint="Raise it.")
    assert str(fault) == "r.toml:8: filter.edge: is too low. Raise it."


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("[supply]\nvoltage = 1\ncomon_mode = 1",
         "r.toml:4: supply.comon_mode is not a known key. Did you mean common_mode?"),
        (SUPPLY + "titel = 'x'", "r.toml:3: titel is not a known key. Did you mean title?"),
        ("\n[supply]\n# nothing", "r.toml:3: supply.voltage is missing."),
        ("", "r.toml:1: supply is missing. Add the table [supply]."),
        ("supply = 3", "r.toml:2: supply: expected a table, found 3."),
        ("supply.voltage = '3 A'", "r.toml:2: supply.voltage: expected a number in V, found '3 A'. "
         "Write it as in '0.6 V'."),
        ("supply.voltage = '-1 V'",
         "r.toml:2: supply.voltage: must be above 0 V, found '-1 V'."),
        ("supply.voltage = true", "r.toml:2: supply.voltage: expected a number in V, found true."),
        ("supply.voltage = [1]",
         "r.toml:2: supply.voltage: expected a number with a unit, found a list of 1."),
        ("supply.voltage = 1\nsupply.common_mode = '120 %'",
         "r.toml:3: supply.common_mode: must be at most 100 %, found '120 %'."),
        ("supply.voltage = 1\nsupply.common_mode = 'half'",
         "r.toml:3: supply.common_mode: expected a number in V, found 'half'. "
         "Write a share of the supply, '50 %', or a voltage, '0.9 V'."),
        (SUPPLY + "title = ''", "r.toml:3: title: must not be empty."),
        (SUPPLY + "title = 5", "r.toml:3: title: expected a text in quotes, found 5."),
        (SUPPLY + "conditions = [\n'tt/27',\n'tt27']", "r.toml:5: conditions[2]: 'tt27' is not a "
         "condition. Write corner/temperature, such as tt/27 (degrees Celsius)."),
        (SUPPLY + "conditions = ['-/27']", "r.toml:3: conditions[1]: '-' cannot name a corner. "
         "Use letters, digits and _ . + -, starting with a letter."),
        (SUPPLY + "conditions = 'tt/27'",
         "r.toml:3: conditions: expected a list in [ ], found 'tt/27'."),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\n[[sweep]]\nfiles = 'b'\n[sweep.axes]\nvgs = 3",
         "r.toml:8: sweep[2].axes.vgs: expected a text in quotes or a table, found 3."),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\naxes.vgs = "
         "{ from = 'name', patern = 'x', pattern = 'y' }",
         "r.toml:5: sweep[1].axes.vgs.patern is not a known key. Did you mean pattern?"),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\naxes.vgs = { from = 'nam', pattern = 'y' }",
         "r.toml:5: sweep[1].axes.vgs.from: expected one of name, title, found 'nam'. "
         "Did you mean name?"),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\naxes.vgs = { column = '' }",
         "r.toml:5: sweep[1].axes.vgs.column: must not be empty."),
        (SUPPLY + "[[sweep]]\nfiles = 5",
         "r.toml:4: sweep[1].files: expected a text in quotes or a list in [ ], found 5."),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\nfingers = '2'", "r.toml:5: sweep[1].fingers: expected a "
         "whole number, found '2'. Write it without quotes."),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\nfingers = 2.5",
         "r.toml:5: sweep[1].fingers: expected a whole number, found 2.5."),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\nfingers = 0",
         "r.toml:5: sweep[1].fingers: must be at least 1, found 0."),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\nnominal = 'yes'",
         "r.toml:5: sweep[1].nominal: expected true or false, found 'yes'."),
        (SUPPLY + "[[sweep]]\nfiles = 'a'\ntemperature = '-300 C'",
         "r.toml:5: sweep[1].temperature: must be above -273.15 C, found '-300 C'."),
    ],
)  # fmt: skip
def test_a_fault_says_where_what_and_what_to_do(text: str, message: str) -> None:
    assert told(text) == [message]


FILTER = SUPPLY + "[filter]\nresponse = 'bessel'\nedge = 1\norder = 5\n"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        (FILTER.replace("bessel", "chebychef"), "r.toml:4: filter.response: expected one of "
         "butterworth, chebyshev, bessel, found 'chebychef'. Did you mean chebyshev?"),
        (FILTER.replace("response = 'bessel'", ""),
         "r.toml:3: filter.response is missing. It is one of: butterworth, chebyshev, bessel."),
        (FILTER.replace("5", "'aut'"),
         "r.toml:6: filter.order: expected a whole number, found 'aut'. Or write 'auto'."),
        (FILTER + "lengths = ['1m']", "r.toml:7: filter.lengths[1]: '1m' could be metres or "
         "millimetres. Write the length in um or nm, or in metres as 1e-6."),
        (FILTER + "lengths = 'all'",
         "r.toml:7: filter.lengths: expected a list in [ ], found 'all'. Or write 'auto'."),
        (FILTER + "noise_band = [1]", "r.toml:7: filter.noise_band: expected 2 values, found 1."),
        (FILTER + "noise_band = []", "r.toml:7: filter.noise_band: expected 2 values, found 0."),
        (FILTER + "noise_band = [1, 2, 3]",
         "r.toml:7: filter.noise_band: expected 2 values, found 3."),
        (FILTER + "noise_band = [2, 1]",
         "r.toml:3: filter: noise_band runs backwards. Give the lower end first."),
    ],
)  # fmt: skip
def test_faults_of_words_lists_and_own_checks(text: str, message: str) -> None:
    assert told(text) == [message]


def test_all_faults_are_told_at_once_in_the_order_of_lines() -> None:
    text = "[filter]\nedge = '1 V'\nordr = 4\nresponse = 3\n[supply]\nvoltage = 'x'\nlow = 1"
    with pytest.raises(Faults) as caught:
        parse_document("format = 1\n" + text, Request, name="r.toml")
    assert [str(fault).split(":")[1] for fault in caught.value.faults] == [
        "2", "3", "4", "5", "7", "8",
    ]  # fmt: skip
    assert [type(fault) for fault in caught.value.faults].count(UnknownName) == 2
    assert len(told("title = ''", heading="")) == 3  # with the missing format and supply


@pytest.mark.parametrize(
    ("heading", "message"),
    [
        ("\nformat = 2\n",
         "r.toml:2: format = 2 is not read here. This version reads format = 1."),
        ("format = true\n",
         "r.toml:1: format = true is not read here. This version reads format = 1."),
        ("format = '1'\n",
         "r.toml:1: format = '1' is not read here. This version reads format = 1."),
    ],
)  # fmt: skip
def test_another_format_is_the_only_fault_told(heading: str, message: str) -> None:
    assert told("nonsense = 3", heading=heading) == [message]


@pytest.mark.parametrize(
    ("text", "start"),
    [
        ("a = 1.8 V", "r.toml:2: not valid TOML: expected newline or end of document after a "
         "statement (column 9). A number with a unit stands in quotes"),
        ("a = tt/27", "r.toml:2: not valid TOML: invalid value (column 5). A text stands in"),
        ("a = 1\na = 2", "r.toml:3: not valid TOML: cannot overwrite a value"),
        ("[a]\n[a]", "r.toml:3: not valid TOML: cannot declare ('a',) twice"),
        ("a = [1,\n", "r.toml:2: not valid TOML: "),
        ("a = " + "[" * 5000, "r.toml"),
    ],
)  # fmt: skip
def test_broken_toml_names_its_line(text: str, start: str) -> None:
    (line,) = told(text)
    assert line.startswith(start)


class Everything(Model):
    slew: SlewRate
    noise: NoiseDensity
    avt: MatchingVoltage
    abeta: MatchingRatio
    density: CapacitanceDensity
    parasitic: CapacitancePerResistance
    source: Resistance
    margin: Degrees
    ripple: Decibel
    hot: TemperatureC


def test_units_of_the_trade() -> None:
    text = (
        "format = 1\nslew = '20 V/us'\nnoise = '40 nV/rtHz'\navt = '3.5 mV um'\nabeta = '1 % um'\n"
        "density = '1 fF/um2'\nparasitic = '20 fF/Mohm'\nsource = '0 ohm'\nmargin = '60 deg'\n"
        "ripple = '0.5 dB'\nhot = '398.15 K'\n"
    )
    assert parse_document(text, Everything).model.model_dump() == {
        "slew": 2e7, "noise": 4e-8, "avt": 3.5e-9, "abeta": 1e-8, "density": 1e-3,
        "parasitic": 2e-20, "source": 0.0, "margin": 60.0, "ripple": 0.5, "hot": 125.0,
    }  # fmt: skip


def _refuse(value: object) -> object:
    raise UnknownName(f"{value!r} is not a layout.", hint="There are: csv.")


def test_own_readers_keep_their_kind_of_error() -> None:
    class Layout(Model):
        layout: Annotated[str, Parsed(_refuse)]

    with pytest.raises(UnknownName, match=r"r.toml:2: layout: 'x' is not a layout. There are: csv"):
        parse_document("format = 1\nlayout = 'x'", Layout, name="r.toml")


def test_a_file_and_paths_beside_it(tmp_path: Path) -> None:
    file = tmp_path / "r.toml"
    file.write_bytes(b"\xef\xbb\xbfformat = 1\r\nsupply.voltage = 1\r\n")
    document: Document[Request] = read_document(file, Request)
    assert document.beside("t/a.h5") == tmp_path / "t" / "a.h5"
    assert document.beside("/x/a.h5") == Path("/x/a.h5")
    assert document.where("supply") == f"{file}:2"
    file.write_bytes(b"format = 1\n# caf\xe9\n")
    with pytest.raises(DataFault, match=r"r\.toml:2: holds a byte that is not UTF-8"):
        read_document(file, Request)
    with pytest.raises(FileTrouble, match="there is no such file"):
        read_document(tmp_path / "none.toml", Request)
    with pytest.raises(FileTrouble, match="is a directory"):
        read_document(tmp_path, Request)


JSON: st.SearchStrategy[Any] = st.recursive(
    st.text(max_size=5) | st.integers() | st.floats() | st.booleans() | st.sampled_from(["auto"]),
    lambda inner: st.lists(inner, max_size=3)
    | st.dictionaries(
        st.sampled_from(["voltage", "files", "axes", "vgs", "from", "column", "edge", "order"]),
        inner, max_size=3,
    ),
    max_leaves=8,
)  # fmt: skip


@given(st.dictionaries(st.sampled_from(["supply", "filter", "sweep", "conditions"]), JSON))
def test_any_document_is_read_or_refused_with_lines(data: dict[str, Any]) -> None:
    from gmid.documents import write_document

    text = write_document({"format": 1, **data})
    try:
        document = parse_document(text, Request, name="r.toml")
    except GmidError as error:
        faults = error.faults if isinstance(error, Faults) else (error,)
        for fault in faults:
            assert fault.where is not None
            assert 1 <= int(fault.where.removeprefix("r.toml:")) <= text.count("\n")
            assert "Input should" not in fault.message
    else:
        assert math.isfinite(document.model.supply.voltage)
