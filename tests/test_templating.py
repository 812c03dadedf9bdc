"""The template loader finds the folder and treats a forgotten value as an error."""

import jinja2
import pytest

from retile.templating import environment


def test_a_name_without_a_value_is_an_error():
    with pytest.raises(jinja2.UndefinedError):
        environment().from_string("{{ size }}").render()


def test_text_stays_as_it_is():
    assert environment().from_string("{{ test }}\n").render(test="a < b && c") == "a < b && c\n"


def test_templates_come_from_an_existing_folder():
    assert isinstance(environment().loader, jinja2.FileSystemLoader)
    assert environment() is environment()
