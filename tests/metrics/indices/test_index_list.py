import importlib
import pkgutil
from collections import Counter

import pytest

import metrics.indices
from metrics.indices import ALL
from metrics.indices.card import Index

PUBLISHED = {
    "HR": "/min",
    "EDV": "mL",
    "ESV": "mL",
    "SV": "mL",
    "EF": "1",
    "EDP": "mm[Hg]",
    "ESP": "mm[Hg]",
    "Pmax": "mm[Hg]",
    "Ea": "mm[Hg]/mL",
    "SW": "mm[Hg].mL",
    "dPdt_max": "mm[Hg]/s",
    "dPdt_min": "mm[Hg]/s",
    "Ees": "mm[Hg]/mL",
    "V0": "mL",
    "Ees_Ea": "1",
    "PRSW": "mm[Hg]",
    "tau": "ms",
    "Pinf": "mm[Hg]",
    "EDPVR_beta": "/mL",
    "EDPVR_stiffness": "mm[Hg]/mL",
    "V20": "mL",
    "V30": "mL",
}


def modules():
    return [importlib.import_module(f"metrics.indices.{found.name}") for found in pkgutil.iter_modules(metrics.indices.__path__)]


def test_the_first_indices_keep_their_names_and_units():
    found = {index.name: index.unit for index in ALL if index.primary}
    assert {name: found[name] for name in PUBLISHED} == PUBLISHED


def test_no_card_is_forgotten_and_none_stands_twice():
    declared = [value for module in modules() for value in vars(module).values() if isinstance(value, Index)]
    assert {(index.name, index.estimator) for index in declared} == {(index.name, index.estimator) for index in ALL}
    assert len({(index.name, index.estimator) for index in ALL}) == len(ALL)


def test_every_index_has_one_primary_estimator():
    assert Counter(index.name for index in ALL if index.primary) == dict.fromkeys((index.name for index in ALL), 1)


@pytest.mark.parametrize("index", ALL, ids=lambda index: f"{index.name}-{index.estimator}")
def test_a_card_says_what_a_reader_needs(index):
    assert index.title
    assert index.needs
    assert index.estimator
    assert index.estimator == index.estimator.lower()
    assert index.revision >= 1
