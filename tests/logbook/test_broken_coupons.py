"""Broken coupon files, each with the exact message it earns."""

# ruff: noqa: E501  (a message is one line, and stands here as it is)

from __future__ import annotations

import pytest

from stackmill.documents.coupons import coupons_of
from stackmill.errors import InputErrors

CASES = {
    "nothing": (
        "",
        [
            "c.csv: error: this coupon file is empty (begin it with name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm)",
        ],
    ),
    "remarks only": (
        "# nothing\n",
        [
            "c.csv: error: this coupon file is empty (begin it with name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm)",
        ],
    ),
    "a header alone": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\n",
        [
            "c.csv:1:1: error: there are no coupons under this header (add a line a piece)",
        ],
    ),
    "no unit": (
        "name,material,energy,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1,0,1,1,1\n",
        [
            "c.csv:1:15: error: the column 'energy' has no unit (write energy_ev)",
        ],
    ),
    "a typing slip": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,detph_sd_nm\na,W,1000,0,10,300,9\n",
        [
            "c.csv:1:57: error: 'detph_sd_nm' is no column of a coupon file (did you mean depth_sd_nm?)",
        ],
    ),
    "an unknown column": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm,colour\na,W,1000,0,10,300,9,red\n",
        [
            "c.csv:1:69: error: 'colour' is no column of a coupon file (as in name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm)",
        ],
    ),
    "the same twice": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm,depth_um\na,W,1000,0,10,300,9,0.3\n",
        [
            "c.csv:1:69: error: 'depth_um' says again what another column says (keep one of them)",
        ],
    ),
    "no material": (
        "name,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,1000,0,10,300,9\n",
        [
            "c.csv:1:1: error: there is no column for the material (add material)",
        ],
    ),
    "no time": (
        "name,material,energy_ev,incidence_deg,depth_nm,depth_sd_nm\na,W,1000,0,300,9\n",
        [
            "c.csv:1:1: error: there is no column for the time (add time_s)",
        ],
    ),
    "no result": (
        "name,material,energy_ev,incidence_deg,time_min\na,W,1000,0,10\n",
        [
            "c.csv:1:1: error: no column says what was measured (add depth_nm,depth_sd_nm or film_nm,film_sd_nm,remaining_nm)",
        ],
    ),
    "no sd": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm\na,W,1000,0,10,300\n",
        [
            "c.csv:1:1: error: nothing says how sure depth is (add depth_sd_nm)",
        ],
    ),
    "too few cells": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,10\n",
        [
            "c.csv:2:1: error: this line has 5 cells, and the header 7 (leave a cell empty, but keep its comma)",
        ],
    ),
    "too many cells": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,10,300,9,9\n",
        [
            "c.csv:2:1: error: this line has 8 cells, and the header 7 (leave a cell empty, but keep its comma)",
        ],
    ),
    "a word": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,ten,300,9\n",
        [
            "c.csv:2:12: error: 'ten' is no number (write a bare number; its unit stands in the header)",
        ],
    ),
    "a unit in a cell": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1 keV,0,10,300,9\n",
        [
            "c.csv:2:5: error: '1 keV' is no number (write a bare number; its unit stands in the header)",
        ],
    ),
    "a comma for a point": (
        'name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,10,"300,5",9\n',
        [
            "c.csv:2:15: error: '300,5' is no number (write a bare number; its unit stands in the header)",
        ],
    ),
    "not a number": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,10,nan,9\n",
        [
            "c.csv:2:15: error: 'nan' is no number to measure (write the value that was read)",
        ],
    ),
    "a minus": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,10,-300,9\n",
        [
            "c.csv:2:15: error: '-300' cannot be (leave out the minus)",
        ],
    ),
    "no error at all": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,10,300,0\n",
        [
            "c.csv:2:19: error: '0' cannot be (write a value above 0)",
        ],
    ),
    "an angle from the surface": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,90,10,300,9\n",
        [
            "c.csv:2:10: error: '90' cannot be: incidence goes from 0 to 89 deg from the normal (check the unit in the header)",
        ],
    ),
    "keV written as eV": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,0.5,0,10,300,9\n",
        [
            "c.csv:2:5: error: '0.5' cannot be: energies go from 1 to 100000 eV (check the unit in the header)",
        ],
    ),
    "no material named": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,,1000,0,10,300,9\n",
        [
            "c.csv:2:1: error: this piece has no material (fill the cell in)",
        ],
    ),
    "a name twice": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,10,300,9\na,W,1000,0,10,310,9\n",
        [
            "c.csv:3:1: error: the name 'a' stands on line 2 too (give each piece its own)",
        ],
    ),
    "known to nothing": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,10,3,9\n",
        [
            "c.csv:2:1: error: this piece is known to no better than its whole depth (measure it better, or leave it out)",
        ],
    ),
    "nothing milled": (
        "name,material,energy_ev,incidence_deg,time_min,time_sd_s,depth_nm,depth_sd_nm,film_nm,film_sd_nm,remaining_nm,remaining_sd_nm,cleared\na,W,1000,0,10,,,,500,5,520,5,\n",
        [
            "c.csv:2:1: error: nothing was milled off this piece (a piece that shows no rate cannot calibrate one)",
        ],
    ),
    "two results": (
        "name,material,energy_ev,incidence_deg,time_min,time_sd_s,depth_nm,depth_sd_nm,film_nm,film_sd_nm,remaining_nm,remaining_sd_nm,cleared\na,W,1000,0,10,,300,9,500,5,200,5,\n",
        [
            "c.csv:2:1: error: depth and remaining stand together (keep the one that was measured)",
        ],
    ),
    "no result in the cells": (
        "name,material,energy_ev,incidence_deg,time_min,time_sd_s,depth_nm,depth_sd_nm,film_nm,film_sd_nm,remaining_nm,remaining_sd_nm,cleared\na,W,1000,0,10,,,,,,,,\n",
        [
            "c.csv:2:1: error: this piece has no result (fill in depth, or remaining, or cleared: yes)",
        ],
    ),
    "maybe cleared": (
        "name,material,energy_ev,incidence_deg,time_min,time_sd_s,depth_nm,depth_sd_nm,film_nm,film_sd_nm,remaining_nm,remaining_sd_nm,cleared\na,W,1000,0,10,5,,,300,9,,,maybe\n",
        [
            "c.csv:2:1: error: 'maybe' is neither yes nor no (write yes if the film was milled through)",
        ],
    ),
    "cleared when": (
        "name,material,energy_ev,incidence_deg,time_min,time_sd_s,depth_nm,depth_sd_nm,film_nm,film_sd_nm,remaining_nm,remaining_sd_nm,cleared\na,W,1000,0,10,,,,300,9,,,yes\n",
        [
            "c.csv:2:1: error: this piece does not say how sharp its clearing was (add time_sd_s: how sure the moment is)",
        ],
    ),
    "a remainder without its film": (
        "name,material,energy_ev,incidence_deg,time_min,time_sd_s,depth_nm,depth_sd_nm,film_nm,film_sd_nm,remaining_nm,remaining_sd_nm,cleared\na,W,1000,0,10,,,,,,200,5,\n",
        [
            "c.csv:2:1: error: this piece has no film (fill the cell in)",
        ],
    ),
    "every line wrong": (
        "name,material,energy_ev,incidence_deg,time_min,depth_nm,depth_sd_nm\na,W,1000,0,0,300,9\nb,W,1000,0,10,,9\n",
        [
            "c.csv:2:12: error: '0' cannot be: a time lies between 1 ms and 1000 h (check the unit in the header)",
            "c.csv:3:1: error: this piece has no result (fill in depth, or remaining, or cleared: yes)",
        ],
    ),
}


@pytest.mark.parametrize("case", CASES)
def test_a_broken_coupon_file_earns_its_message(case):
    text, messages = CASES[case]
    with pytest.raises(InputErrors) as refused:
        coupons_of(text, "c.csv")
    assert [error.headline() for error in refused.value.errors] == messages
    assert all(message.endswith(")") for message in messages)  # each has a cure
