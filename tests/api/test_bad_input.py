"""Wrong requests, each with its status, the field it points at and the sentence it is answered with."""

# The table reads best with one request a line.
# ruff: noqa: E501

from __future__ import annotations

import json
from typing import Any

import httpx
import pytest

from tests.api.client import check_problem_document
from tests.api.halden_reach import ask_points, block, changed, sight_port_bar
from tests.api.wrong_requests import Wrong, check_wrong

pytestmark = pytest.mark.anyio


def problem(name: str, path: str, new: Any, pointer: str, sentence: str, base: Any = None) -> Wrong:
    """The bar, or another problem, with one field changed, posted to be stored."""
    body = changed(sight_port_bar() if base is None else base, path, new)
    return Wrong(name, "/v1/problems", json.dumps(body).encode(), 422, pointer, sentence)


def question(name: str, call: str, path: str, new: Any, pointer: str, sentence: str, base: Any = None) -> Wrong:
    """A question about the bar with one field changed."""
    body = changed(QUESTIONS[call] if base is None else base, path, new)
    return Wrong(name, f"/v1/{call}", json.dumps(body).encode(), 422, pointer, sentence)


def raw(name: str, content: bytes | str, status: int, sentence: str, **headers: str) -> Wrong:
    """A body that is not what it should be as a whole."""
    encoded = content.encode() if isinstance(content, str) else content
    named = tuple((key.replace("_", "-"), value) for key, value in headers.items())
    return Wrong(name, "/v1/fields", encoded, status, None, sentence, named)


QUESTIONS: dict[str, Any] = {
    "fields": {
        "problem": sight_port_bar(),
        "evaluate": {
            "grids": [{"x": {"from": 0, "to": 40, "count": 5}, "y": [0, 30], "z": 5}],
            "points": [{"at": [20, 30, 5]}],
        },
    },
    "flux-totals": {
        "problem": sight_port_bar(),
        "evaluate": {"patches": [{"face": "z_low", "patch": 0}], "planes": [{"z": 20}]},
    },
    "convergence": {"problem": sight_port_bar(), "evaluate": {"points": [{"at": [20, 30, 5]}]}},
}

READINGS = {
    "condition": "held",
    "value": {
        "map": "samples",
        "x": [0, 20, 40],
        "y": [0, 60],
        "table": [[30, 31], [35, 36], [30, 31]],
    },
}
BLOCK = block(z_low=READINGS)
WINDOW = "faces/z_low/value/patches/0"
CSV = block(z_low={"condition": "held", "value": {"map": "samples", "csv": ",0,60\n0,1,2\n40,3,4"}})

UNITS = [
    problem("length in kilograms", "body/size/x", "40 kg", "#/body/size/x", 'The unit "kg" does not measure length; wanted is a length such as mm.'),
    problem("length without unit", "body/size/x", "40", "#/body/size/x", "The text has no unit"),
    problem("length in words", "body/size/x", "forty", "#/body/size/x", "The text does not begin with a number"),
    problem("decimal comma", "body/size/x", "1,5 mm", "#/body/size/x", "write decimals with a point"),
    problem("arithmetic in a length", "body/size/x", "2**3**4**5 m", "#/body/size/x", "The unit is not readable"),
    problem("two statements", "body/size/x", "1 m; 2", "#/body/size/x", "The unit is not readable"),
    problem("unknown unit", "body/size/x", "4 xyzzy", "#/body/size/x", 'The unit "xyzzy" is not known'),
    problem("length beyond numbers", "body/size/x", "1e999 m", "#/body/size/x", "The quantity in mm has to be zero or between 1e-60 and 1e+60 in size."),
    problem("empty text", "body/size/x", " ", "#/body/size/x", "The text is empty"),
    problem("long text", "body/size/x", "4 " + "m" * 99, "#/body/size/x", "longer than 64 characters"),
    problem("flux as conductivity", "body/conductivity/x", "95 W/m^2", "#/body/conductivity/x", 'The unit "W/m^2" does not measure thermal conductivity'),
    problem("watt per millikelvin", "body/conductivity/x", "95 W/mK", "#/body/conductivity/x", "Write W/(m K) if everything after the stroke divides."),
    problem("conductivity of electricity", "body/conductivity/x", "95 S/m", "#/body/conductivity/x", "wanted is a thermal conductivity such as W/(m K)"),
    problem("difference as temperature", "faces/x_low/value", "30 delta_degC", "#/faces/x_low/value", "measures a difference"),
    problem("coulomb as temperature", "faces/x_low/value", "30 C", "#/faces/x_low/value", 'The unit "C" does not measure temperature'),
    problem("film coefficient as conductivity", "faces/x_high/coefficient", "850 W/(m K)", "#/faces/x_high/coefficient", "does not measure film coefficient"),
    problem("inflow per volume", "faces/y_high/inflow", "1.5 kW/m^3", "#/faces/y_high/inflow", "does not measure heat flux"),
    problem("declared length in seconds", "units/length", "s", "#/units/length", 'The unit "s" does not measure length'),
    problem("declared potential in volts", "units/potential", "V", "#/units/potential", 'The unit "V" does not measure temperature'),
    problem("unreadable declared unit", "units/length", "m m!", "#/units/length", "The unit is not readable"),
    question("accuracy in metres", "fields", "accuracy", {"absolute": "1e-6 m"}, "#/accuracy/absolute", "wanted is a difference of temperature such as K"),
    question("edge gap in kelvin", "flux-totals", "evaluate/edge_gap", "10 K", "#/evaluate/edge_gap", "wanted is a length such as mm"),
]  # fmt: skip

NUMBERS = [
    problem("negative size", "body/size/x", -40, "#/body/size/x", "The size along x is -40 mm; it has to be greater than zero."),
    problem("zero size", "body/size/y", "0 m", "#/body/size/y", "The size along y is 0 m; it has to be greater than zero."),
    problem("negative conductivity", "body/conductivity/z", -130, "#/body/conductivity/z", "The conductivity along z is -130 W/(m K); it has to be greater than zero."),
    problem("zero film coefficient", "faces/x_high/coefficient", 0, "#/faces/x_high/coefficient", "The film coefficient is 0 W/(m^2 K); it has to be greater than zero."),
    problem("truth as a size", "body/size/x", True, "#/body/size/x", "a number and a unit is wanted here, not true or false."),
    problem("list as a size", "body/size/x", [40], "#/body/size/x", "is wanted here, not a list."),
    problem("null as a size", "body/size/x", None, "#/body/size/x", "is wanted here, not null."),
    problem("huge whole number", "body/size/x", 10**400, "#/body/size/x", "The number has to be zero or between 1e-60 and 1e+60 in size."),
    problem("size too small for a body", "body/size/x", 1e-200, "#/body/size/x", "The number has to be zero or between 1e-60 and 1e+60 in size."),
    problem("reading beyond all measure", "faces/z_low/value/table/1/1", 1e200, "#/faces/z_low/value/table/1/1", "The number has to be at most 1e+60.", BLOCK),
    problem("number as a name", "name", 5, "#/name", "A text is wanted here."),
    question("text as a count", "fields", "evaluate/grids/0/x/count", "5", "#/evaluate/grids/0/x/count", "A whole number is wanted here."),
    question("truth as a count", "fields", "evaluate/grids/0/x/count", True, "#/evaluate/grids/0/x/count", "A whole number is wanted here."),
    question("half a count", "fields", "evaluate/grids/0/x/count", 2.5, "#/evaluate/grids/0/x/count", "A whole number is wanted here."),
    question("count of one", "fields", "evaluate/grids/0/x/count", 1, "#/evaluate/grids/0/x/count", "The number has to be at least 2."),
    question("text as a part", "fields", "accuracy", {"relative": "1e-9"}, "#/accuracy/relative", "A number is wanted here, not a text."),
    question("accuracy of nothing", "fields", "accuracy", {"absolute": 0}, "#/accuracy/absolute", "The accuracy is 0 K; it has to be greater than zero."),
    question("accuracy of everything", "fields", "accuracy", {"relative": 3}, "#/accuracy/relative", "The number has to be at most 0.1."),
    question("negative gap", "flux-totals", "evaluate/edge_gap", -1, "#/evaluate/edge_gap", "The edge gap is -1 mm; it has to be greater than zero."),
]  # fmt: skip

SHAPES = [
    problem("misspelt key", "conductivty", 95, "#/conductivty", 'the nearest one that is known is "conductivity".'),
    problem("unknown key", "colour", "red", "#/colour", "This key is not known here"),
    problem("key of another place", "body/faces", {}, "#/body/faces", "This key is not known here; leave it out."),
    problem("missing body", "body", ..., "#/body", "This field is required."),
    problem("missing face", "faces/y_low", ..., "#/faces/y_low", "This field is required."),
    problem("missing far end", "body/size/z", 25, "#/faces/z_high", "This field is required."),
    problem("far end of a bar", "faces/z_high", {"condition": "insulated"}, "#/faces/z_high", "A body that is semi-infinite along z has no face z_high; leave it out."),
    problem("far side of a body open along x", "body/size/x", "semi-infinite", "#/faces/x_high", "A body that is semi-infinite along x has no face x_high; leave it out."),
    problem("unknown potential", "potential", "pressure", "#/potential", 'One of "temperature", "electric_potential"'),
    problem("unknown condition", "faces/y_low/condition", "warm", "#/faces/y_low/condition", 'One of "held", "flux", "film", "insulated", "mixed" is wanted here.'),
    problem("face without condition", "faces/y_low", {}, "#/faces/y_low/condition", "The field condition is required."),
    problem("number as a face", "faces/y_low", 30, "#/faces/y_low", "An object is wanted here."),
    problem("value on an insulated face", "faces/y_low/value", 30, "#/faces/y_low/value", "This key is not known here"),
    problem("sources as an object", "sources", {}, "#/sources", "A list is wanted here."),
    problem("half a source", "sources", [{"x": [0, 40]}], "#/sources/0/density", "This field is required."),
    problem("source outside", "sources", [{"x": [0, 41], "density": 1}], "#/sources/0/x", "Source 0 reaches from 0 to 41 along x"),
    problem("source inside out", "sources", [{"x": [20, 10], "density": 1}], "#/sources/0/x", "positive extent"),
    problem("interval of three", "sources", [{"x": [0, 1, 2], "density": 1}], "#/sources/0/x", "At most 2 entries are allowed here."),
    problem("interval of one", "sources", [{"x": [0], "density": 1}], "#/sources/0/x", "At least 2 entries are wanted here; there is 1."),
]  # fmt: skip

MAPS = [
    problem("unknown map", "faces/z_low/value/map", "picture", "#/faces/z_low/value", 'A map has to say which it is'),
    problem("formula without an expression", "faces/z_low/value", {"map": "formula"}, "#/faces/z_low/value/expression", "This field is required."),
    problem("formula of an unknown name", "faces/z_low/value", {"map": "formula", "expression": "20 + 3*u"}, "#/faces/z_low/value/expression", "The name u at character 8 of the expression is not known"),
    problem("formula of the wrong coordinate", "faces/z_low/value", {"map": "formula", "expression": "20 + z"}, "#/faces/z_low/value/expression", "The face has no extent along z, at character 6 of the expression; its coordinates are x and y."),
    problem("formula of an unknown function", "faces/z_low/value", {"map": "formula", "expression": "20 + 2^2*step(x)"}, "#/faces/z_low/value/expression", "The function step at character 10 of the expression is not known"),
    problem("formula cut short", "faces/z_low/value", {"map": "formula", "expression": "20 + (x"}, "#/faces/z_low/value/expression", "The expression cannot be read near character"),
    problem("formula that would run", "faces/z_low/value", {"map": "formula", "expression": "__import__(0)"}, "#/faces/z_low/value/expression", "The function __import__ at character 1 of the expression is not known"),
    problem("formula with an attribute", "faces/z_low/value", {"map": "formula", "expression": "x.real"}, "#/faces/z_low/value/expression", "has no place in a formula"),
    problem("formula of two arguments too many", "faces/z_low/value", {"map": "formula", "expression": "exp(x, y)"}, "#/faces/z_low/value/expression", "The function exp at character 1 of the expression takes one argument, not 2."),
    problem("formula of a large power", "faces/z_low/value", {"map": "formula", "expression": "x^100"}, "#/faces/z_low/value/expression", "The exponent at character 3 of the expression is 100; it has to lie between -64 and 64."),
    problem("formula beyond all numbers that are read", "faces/z_low/value", {"map": "formula", "expression": "1e308"}, "#/faces/z_low/value/expression", "The formula reaches 1e+308 in size; no number may be larger than 1e+60."),
    problem("formula with a remark", "faces/z_low/value", {"map": "formula", "expression": "20 # + x"}, "#/faces/z_low/value/expression", "Character 4 of the expression is none that is used in a formula."),
    problem("formula that is not finite", "faces/z_low/value", {"map": "formula", "expression": "20/x"}, "#/faces/z_low/value/expression", "The formula has no finite value at x = 0, y = 0."),
    problem("formula with a pole", "faces/z_low/value", {"map": "formula", "expression": "1/(x-20.123)"}, "#/faces/z_low/value/expression", "The formula jumps, turns too sharply or is not finite near x = 20.0781"),
    problem("formula with a kink askew", "faces/z_low/value", {"map": "formula", "expression": "abs(x-y)"}, "#/faces/z_low/value/expression", "kinks may only run along an axis"),
    problem("formula too long", "faces/z_low/value", {"map": "formula", "expression": "x+" * 250 + "x"}, "#/faces/z_low/value/expression", "The text has to have at most 500 characters."),
    problem("formula too deep", "faces/z_low/value", {"map": "formula", "expression": "-" * 60 + "x"}, "#/faces/z_low/value/expression", "levels of nesting"),
    problem("formula along an axis without end", "faces/x_low/value", {"map": "formula", "expression": "30 + z"}, "#/faces/x_low/value/expression", "The formula varies along z, where the face has no end"),
    problem("patch outside", f"{WINDOW}/x", [5, 41], "#/faces/z_low/value/patches/0", "Patch 0 reaches from (5, 10) to (41, 50)"),
    problem("patch inside out", f"{WINDOW}/x", [35, 5], "#/faces/z_low/value/patches/0", "it has to have a positive extent"),
    problem("patches that overlap", "faces/z_low/value/patches", [{"x": [5, 20], "y": [10, 50], "value": 1}, {"x": [19, 35], "y": [10, 50], "value": 2}], "#/faces/z_low/value/patches/1", "Patches 0 and 1 overlap."),
    problem("patch along the wrong axis", f"{WINDOW}/z", [0, 5], "#/faces/z_low/value/patches/0/z", "The face z_low has no extent along z; leave z out."),
    problem("patch along one axis", f"{WINDOW}/y", ..., "#/faces/z_low/value/patches/0/y", "An interval along y is required on the face z_low"),
    problem("patch value in metres", f"{WINDOW}/value", "640 m", "#/faces/z_low/value/patches/0/value", "does not measure temperature"),
    problem("two patches of one name", "faces/z_low/value/patches", [{"x": [5, 9], "y": [1, 2], "value": 1, "name": "a"}, {"x": [19, 35], "y": [1, 2], "value": 2, "name": "a"}], "#/faces/z_low/value/patches/1/name", "Another patch of this face has the same name."),
    problem("no background", "faces/z_low/value/background", ..., "#/faces/z_low/value/background", "This field is required."),
    problem("missing reading", "faces/z_low/value/table/1/1", None, "#/faces/z_low/value", "Readings are missing at (x, y) = (20, 60); complete them", BLOCK),
    problem("text as a reading", "faces/z_low/value/table/1/1", "35", "#/faces/z_low/value/table/1/1", "A number is wanted here", BLOCK),
    problem("table too short", "faces/z_low/value/table", [[1, 2]], "#/faces/z_low/value/table", "The table has 1 rows; it needs one for each of the 3 places along x.", BLOCK),
    problem("row too short", "faces/z_low/value/table/1", [1], "#/faces/z_low/value/table/1", "The row has 1 readings; it needs one for each of the 2 places along y.", BLOCK),
    problem("axis that turns back", "faces/z_low/value/x", [0, 40, 20], "#/faces/z_low/value/x", "at least two places in increasing order", BLOCK),
    problem("readings that end early", "faces/z_low/value/x", [0, 20, 30], "#/faces/z_low/value/x", "ask for the outermost readings to be held", BLOCK),
    problem("readings beyond the face", "faces/z_low/value/x", [0, 20, 50], "#/faces/z_low/value/x", "The readings reach from 0 to 50; the face reaches from 0 to 40.", BLOCK),
    problem("axis left out", "faces/z_low/value/y", ..., "#/faces/z_low/value/y", "The places of the readings along y are required", BLOCK),
    problem("axis of another face", "faces/z_low/value/z", [0, 1], "#/faces/z_low/value/z", "The face z_low has no extent along z", BLOCK),
    problem("no table", "faces/z_low/value/table", ..., "#/faces/z_low/value", "either as `table` with its axes or as `csv`", BLOCK),
    problem("words in CSV", "faces/z_low/value/csv", ",0,60\n0,1,warm\n40,3,4", "#/faces/z_low/value/csv", "Row 2, column 3 has to be a reading", CSV),
    problem("ragged CSV", "faces/z_low/value/csv", ",0,60\n0,1\n40,3,4", "#/faces/z_low/value/csv", "Row 2 has 2 entries; the first row has 3.", CSV),
    problem("CSV without readings", "faces/z_low/value/csv", "0,60", "#/faces/z_low/value/csv", "needs a first row", CSV),
    problem("CSV that ends early", "faces/z_low/value/csv", ",0,50\n0,1,2\n40,3,4", "#/faces/z_low/value/csv", "the face from 0 to 60", CSV),
    problem("hole in CSV", "faces/z_low/value/csv", ",0,60\n0,1,\n40,3,4", "#/faces/z_low/value", "Readings are missing at (x, y) = (0, 60)", CSV),
]  # fmt: skip

PLACES = [
    question("point outside", "fields", "evaluate/points/0/at/0", 41, "#/evaluate/points/0/at/0", "x = 41 mm lies outside the body, which reaches from 0 to 40 mm."),
    question("point before the bar", "fields", "evaluate/points/0/at/2", -1, "#/evaluate/points/0/at/2", "z = -1 mm lies outside the body, which reaches from 0 without end."),
    question("point of two coordinates", "fields", "evaluate/points/0/at", [1, 2], "#/evaluate/points/0/at", "At least 3 entries are wanted here; there are 2."),
    question("grid outside", "fields", "evaluate/grids/0/x/to", 41, "#/evaluate/grids/0/x/to", "x = 41 mm lies outside the body"),
    question("grid backwards", "fields", "evaluate/grids/0/x/from", 40, "#/evaluate/grids/0/x", "`to` has to be greater than `from`."),
    question("places that do not increase", "fields", "evaluate/grids/0/y", [30, 30], "#/evaluate/grids/0/y", "The places have to increase."),
    question("empty axis", "fields", "evaluate/grids/0/y", [], "#/evaluate/grids/0/y", "At least 1 entry is wanted here; there are 0."),
    question("axis left out", "fields", "evaluate/grids/0/z", ..., "#/evaluate/grids/0/z", "This field is required."),
    question("absurd grid", "fields", "evaluate/grids/0", {"x": {"from": 0, "to": 40, "count": 1000}, "y": {"from": 0, "to": 60, "count": 1000}, "z": {"from": 0, "to": 60, "count": 1000}}, "#/evaluate/grids/0", "The grid has 1000000000 places; at most 2000000 are allowed"),
    question("absurd axis", "fields", "evaluate/grids/0/x/count", 10**12, "#/evaluate/grids/0/x/count", "The number has to be at most 1000000."),
    question("nothing asked", "fields", "evaluate", {}, "#/evaluate", "Ask for something"),
    question("unknown quantity", "fields", "evaluate/quantities", ["heat"], "#/evaluate/quantities/0", 'One of "potential" or "flux" is wanted here.'),
    question("no quantity", "fields", "evaluate/quantities", [], "#/evaluate/quantities", "At least 1 entry is wanted here; there are 0."),
    question("mean without end", "fields", "evaluate/means", [{"face": "x_low"}], "#/evaluate/means/0", "give a finite rectangle"),
    question("mean of no patch", "fields", "evaluate/means", [{"face": "z_low", "patch": 7}], "#/evaluate/means/0/patch", "There is no such patch; the face z_low has the patches 0 to 0."),
    question("patch of a plain face", "flux-totals", "evaluate/patches", [{"face": "y_low", "patch": 0}], "#/evaluate/patches/0/patch", "the face y_low has no patches."),
    question("patch by truth", "flux-totals", "evaluate/patches/0/patch", True, "#/evaluate/patches/0/patch", "The number of a patch, counted from 0, or its name is wanted here."),
    question("patch and rectangle", "flux-totals", "evaluate/patches/0/x", [0, 5], "#/evaluate/patches/0/patch", "Give either a patch or intervals"),
    question("rectangle outside", "flux-totals", "evaluate/patches", [{"face": "z_low", "x": [0, 50], "y": [0, 5]}], "#/evaluate/patches/0/x", "The interval from 0 to 50"),
    question("total of a face that is not there", "flux-totals", "evaluate/faces", ["z_high"], "#/evaluate/faces/0", "A body that is semi-infinite along z has no face z_high."),
    question("total of an unknown face", "flux-totals", "evaluate/faces", ["top"], "#/evaluate/faces/0", 'One of "x_low"'),
    question("plane outside", "flux-totals", "evaluate/planes", [{"x": 50}], "#/evaluate/planes/0/x", "x = 50 mm lies outside the body"),
    question("plane along two axes", "flux-totals", "evaluate/planes", [{"x": 5, "y": 5}], "#/evaluate/planes/0", "Give one length along exactly one axis"),
    question("plane nowhere", "flux-totals", "evaluate/planes", [{}], "#/evaluate/planes/0", "Give one length along exactly one axis"),
    question("gap as wide as the face", "flux-totals", "evaluate/edge_gap", 30, "#/evaluate/edge_gap", "leaves nothing"),
    question("convergence nowhere", "convergence", "evaluate/points", [], "#/evaluate/points", "At least 1 entry is wanted here; there are 0."),
    question("no terms", "convergence", "evaluate/overshoot_terms", 0, "#/evaluate/overshoot_terms", "The number has to be at least 1."),
    question("problem and id", "fields", "problem_id", "0" * 64, "#", "Give either `problem` or `problem_id`."),
    question("neither problem nor id", "fields", "problem", ..., "#", "Give either `problem` or `problem_id`."),
    question("two accuracies", "fields", "accuracy", {"absolute": 1, "relative": 0.1}, "#/accuracy", "Give either `absolute` or `relative`."),
    question("wrong unit deep in a question", "fields", "problem/faces/z_low/value/patches/0/value", "1 V", "#/problem/faces/z_low/value/patches/0/value", "does not measure temperature"),
    Wrong("id of another shape", "/v1/fields", b'{"problem_id": "../etc", "evaluate": {"extremes": true}}', 422, "#/problem_id", "The text has to match"),
]  # fmt: skip

BODIES = [
    raw("empty body", "", 400, "The body is empty; a JSON object is wanted."),
    raw("broken JSON", '{"problem": {', 400, "The body is not JSON at line 1, column 14"),
    raw("JSON with a tail", "{} {}", 400, "The body is not JSON at line 1, column 4"),
    raw("single quotes", "{'problem': 1}", 400, "The body is not JSON at line 1, column 2"),
    raw("NaN", '{"problem": NaN}', 400, "NaN is not a JSON number"),
    raw("Infinity", '{"problem": -Infinity}', 400, "-Infinity is not a JSON number"),
    raw("thousands of keys", "{" + ",".join(f'"k{i}": 1' for i in range(20_000)) + "}", 400, "An object in the body has 20000 keys; no object here has more than 100."),
    raw("key twice", '{"problem": 1, "problem": 2}', 400, 'The key "problem" stands twice in one object'),
    raw("a hundred thousand brackets", "[" * 100_000, 400, "The body is nested too deeply."),
    raw("number of five thousand digits", '{"problem": ' + "9" * 5_000 + "}", 400, "too many digits"),
    raw("not UTF-8", b'{"problem": "\xff"}', 400, "The body is not UTF-8: byte 13 cannot be read."),
    raw("half a surrogate pair", '{"problem": "\\ud800"}', 400, "half a surrogate pair"),
    raw("list as a body", "[]", 422, "An object is wanted here."),
    raw("text as a body", '"problem"', 422, "An object is wanted here."),
    raw("null as a body", "null", 422, "An object is wanted here."),
    raw("form", "problem=1", 415, "Content-Type: application/json", Content_Type="application/x-www-form-urlencoded"),
    raw("no type", "{}", 415, "Content-Type: application/json", Content_Type=""),
    raw("another character set", "{}", 415, "The body has to be encoded in UTF-8.", Content_Type="application/json; charset=utf-16"),
    raw("compressed", b"\x1f\x8b", 415, "Compressed bodies are not read", Content_Encoding="gzip"),
    raw("answer as a web page", json.dumps(QUESTIONS["fields"]), 406, "Answers are application/json or", Accept="text/html"),
    Wrong("number that is infinite as a double", "/v1/fields", b'{"problem_id": "' + b"0" * 64 + b'", "evaluate": {"points": [{"at": [1e999, 0, 0]}]}}', 422, "#/evaluate/points/0/at/0", "The number has to be zero or between 1e-60 and 1e+60 in size."),
]  # fmt: skip

TABLE = [*UNITS, *NUMBERS, *SHAPES, *MAPS, *PLACES, *BODIES]


def test_table_is_long_enough_and_names_are_unique_within_a_call() -> None:
    assert len(TABLE) >= 60
    assert len({(wrong.path, wrong.name) for wrong in TABLE}) == len(TABLE)


@pytest.mark.parametrize("wrong", TABLE, ids=lambda wrong: f"{wrong.path[4:]}: {wrong.name}")
async def test_wrong_request_is_answered_with_one_clear_sentence(client: httpx.AsyncClient, wrong: Wrong) -> None:
    await check_wrong(client, wrong)


async def test_all_wrong_fields_are_named_at_once(client: httpx.AsyncClient) -> None:
    problem = sight_port_bar()
    for path, new in (
        ("body/size/x", -1),
        ("body/conductivity/y", "W"),
        ("faces/x_low/value", "3 V"),
        ("faces/z_low/value/patches/0/x", [5, 41]),
        ("units/flux", "W"),
    ):
        problem = changed(problem, path, new)
    document = check_problem_document(await client.post("/v1/problems", json=problem), 422)
    assert [error["pointer"] for error in document["errors"]] == [
        "#/units/flux",
        "#/body/size/x",
        "#/body/conductivity/y",
        "#/faces/x_low/value",
    ]
    assert document["detail"] == "4 fields of the request cannot be used; see `errors`."


async def test_input_is_not_echoed(client: httpx.AsyncClient) -> None:
    secret = "swordfish" * 100
    question = ask_points(sight_port_bar(), [1, 1, 1]) | {"accuracy": secret, "password": {"is": secret}}
    answer = await client.post("/v1/fields", json=question)
    check_problem_document(answer, 422)
    assert "swordfish" not in answer.text
