"""The description of the API against the OpenAPI Specification 3.1, by a general validator."""

from openapi_spec_validator import OpenAPIV31SpecValidator

from service.api.app import create_app
from service.settings import Settings


def test_the_description_is_valid_openapi_3_1() -> None:
    description = create_app(Settings()).openapi()
    assert description["openapi"].startswith("3.1")
    assert [error.message for error in OpenAPIV31SpecValidator(description).iter_errors()] == []
