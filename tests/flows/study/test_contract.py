"""The published schemas take what the readers take, and refuse what can be seen field by field."""

import jsonschema
import pytest

from checks import ALL as CHECKS
from flows.study.contract import json_schemas


@pytest.fixture(scope="module")
def schemas():
    return json_schemas()


def test_both_schemas_are_schemas(schemas):
    assert set(schemas) == {"acquisition.json", "protocol.toml"}
    for schema in schemas.values():
        jsonschema.Draft202012Validator.check_schema(schema)


def test_a_declaration_that_is_read_is_valid_and_a_misspelt_one_is_not(schemas, declared):
    validator = jsonschema.Draft202012Validator(schemas["acquisition.json"])
    assert list(validator.iter_errors(declared)) == []
    assert list(validator.iter_errors(declared | {"x_own": 1})) == []
    for change in ({"own": 1}, {"subject": "a b"}, {"subject": ".."}, {"chamber": "X"}, {"runs": []}, {"format": 2}):
        assert list(validator.iter_errors(declared | change)), change


def test_every_check_has_its_limits_in_the_schema(schemas):
    limits = schemas["protocol.toml"]["properties"]["limits"]["properties"]
    assert set(limits) == {check.name for check in CHECKS}
    assert set(limits["loop-closure"]["properties"]) >= {"fail_above"}
    validator = jsonschema.Draft202012Validator(schemas["protocol.toml"])
    protocol = {"study": {"name": "tarn", "version": "1"}, "sites": {"harbour": {"timezone": "UTC"}}}
    assert list(validator.iter_errors(protocol)) == []
    assert list(validator.iter_errors(protocol | {"limits": {"loop-closure": {"fail_abov": 1}}}))
