"""The pictures of the README are made by the tool, and say something."""

import re

import numpy as np
import pytest
from matplotlib import image

from tests.pictures import FOLDER, make

README = FOLDER.parents[2] / "README.md"


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    return make(tmp_path_factory.mktemp("pictures"))


def test_every_picture_of_the_readme_is_made_and_has_a_text_in_its_place(made):
    shown = re.findall(r"!\[([^\]]+)\]\(drivers/demo/pictures/([^)]+)\)", README.read_text(encoding="utf-8"))
    assert {file for _, file in shown} == {file.name for file in made}
    assert all(len(text) > 20 for text, _ in shown)


def test_no_picture_is_blank(made):
    for file in made:
        pixels = image.imread(file)[..., :3]
        inked = np.mean(pixels.min(axis=2) < 0.9)
        assert 0.01 < inked < 0.6, file.name  # lines and letters; a blank sheet has 0
        assert min(pixels.shape[:2]) > 400


def test_the_committed_pictures_are_those_that_the_tool_makes(made):
    """Fonts and their edges differ from machine to machine, so the sheets are compared coarsely: blocks of 10 by 10 pixels."""
    for file in made:
        now, then = (blocks(image.imread(folder / file.name)) for folder in (file.parent, FOLDER))
        assert now.shape == then.shape
        assert np.abs(now - then).mean() < 0.03, f"{file.name}: run python -m tests.pictures"


def blocks(pixels):
    grey = pixels[..., :3].mean(axis=2)
    rows, columns = (10 * (n // 10) for n in grey.shape)
    return grey[:rows, :columns].reshape(rows // 10, 10, columns // 10, 10).mean(axis=(1, 3))
