"""docs/accuracy.png shows the library as it is, and can be made again."""

from __future__ import annotations

import pytest

from stackmill.materials.library import Library
from tests.published import plot_accuracy


@pytest.mark.regression
def test_the_picture_shows_the_numbers_of_today():
    assert plot_accuracy.current_digest().encode() in plot_accuracy.PICTURE.read_bytes()


@pytest.mark.regression
def test_the_picture_repeats_byte_for_byte():
    assert plot_accuracy.png() == plot_accuracy.png()


@pytest.mark.closed_form
def test_every_material_is_in_it_and_every_axis_has_its_unit():
    library = Library.load()
    figure = plot_accuracy.draw(library)
    shown = {label.get_text() for axes in figure.axes[1:] for label in axes.get_xticklabels()}
    assert shown == set(library.names())
    assert all("[" in axes.get_ylabel() for axes in figure.axes)
    assert "[atoms/ion]" in figure.axes[0].get_xlabel()
    drawn = sum(len(c.get_offsets()) for c in figure.axes[0].collections[1:])
    assert drawn == len(plot_accuracy.points(library)) > 150
