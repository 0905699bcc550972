import pytest
from pydantic import Field, model_validator

from matlib.documents import ContradictionError, Document, validated
from matlib.errors import Fault, FaultyInputError


class Inner(Document):
    size: float = Field(ge=0.0, le=10.0, description="the size of the inner part")
    kind: str = "plain"

    @model_validator(mode="after")
    def _plain_is_small(self):
        if self.kind == "plain" and self.size > 5.0:
            raise ContradictionError("size", f"{self.size:g} and plain", "at most 5 where plain")
        return self


class Outer(Document):
    name: str = Field(min_length=1, description="the name")
    count: int = 1
    inner: list[Inner] | None = Field(None, max_length=2)
    whole: Inner | None = None


def faults_of(data, prefix=()):
    with pytest.raises(FaultyInputError) as caught:
        validated(Outer, data, prefix)
    return caught.value.faults


def test_data_of_the_right_form_become_a_document():
    document = validated(Outer, {"name": "a", "inner": [{"size": 3}], "whole": {"size": 7.0, "kind": "odd"}})
    assert (document.name, document.inner[0].size, document.whole.kind) == ("a", 3.0, "odd")


@pytest.mark.parametrize(
    ("data", "fault"),
    [
        ({}, Fault(key="name", found="nothing", expected="the name", hint="add the key")),
        ({"name": 3}, Fault(key="name", found="3", expected="text in quotes")),
        ({"name": ""}, Fault(key="name", found="''", expected="text that is not empty")),
        ({"name": "a", "count": 1.5}, Fault(key="count", found="1.5", expected="a whole number")),
        ({"name": "a", "count": True}, Fault(key="count", found="True", expected="a whole number")),
        ({"name": "a", "whole": 3}, Fault(key="whole", found="3", expected="a table")),
        ({"name": "a", "inner": {"size": 1}}, Fault(key="inner", found="a table", expected="a list")),
        (
            {"name": "a", "inner": [{"size": 1}] * 3},
            Fault(key="inner", found="[{'size': 1}, {'size': 1}, {'size': 1}]", expected="at most 2 entries"),
        ),
        (
            {"name": "a", "inner": [{"size": 1}, {}]},
            Fault(key="inner[2].size", found="nothing", expected="the size of the inner part", hint="add the key"),
        ),
        ({"name": "a", "whole": {"size": "1"}}, Fault(key="whole.size", found="'1'", expected="a number")),
        ({"name": "a", "whole": {"size": -1}}, Fault(key="whole.size", found="-1", expected="a number >= 0")),
        ({"name": "a", "whole": {"size": 11}}, Fault(key="whole.size", found="11", expected="a number <= 10")),
        (
            {"name": "a", "whole": {"size": float("nan")}},
            Fault(key="whole.size", found="nan", expected="a finite number"),
        ),
        (
            {"name": "a", "whole": {"size": float("inf")}},
            Fault(key="whole.size", found="inf", expected="a finite number"),
        ),
        (
            {"name": "a", "whole": {"size": 7.0}},
            Fault(key="whole.size", found="7 and plain", expected="at most 5 where plain"),
        ),
        (
            {"name": "a", "whole": {"size": 1, "Kind": "x"}},
            Fault(key="whole.Kind", found="'x'", expected="one of the keys kind, size", hint="write 'kind'"),
        ),
        (
            {"name": "a", "extra": 1},
            Fault(key="extra", found="1", expected="one of the keys count, inner, name, whole", hint="remove the key"),
        ),
    ],
)
def test_a_fault_names_its_key_what_was_found_and_what_is_expected(data, fault):
    assert faults_of(data) == (fault,)


def test_all_faults_are_reported_at_once():
    keys = [fault.key for fault in faults_of({"count": "x", "inner": [{"size": -1}, {"sise": 2}], "whole": 3})]
    assert sorted(keys) == ["count", "inner[1].size", "inner[2].sise", "inner[2].size", "name", "whole"]


def test_a_table_inside_a_file_is_named_from_the_top():
    assert faults_of({}, ("segment", 3))[0].key == "segment[4].name"
    assert faults_of([], ())[0].key == "file"
