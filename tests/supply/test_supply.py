"""What the service is made of: locked, hashed, known, licensed, listed."""

import copy
import json
import re
from importlib import metadata

import pytest
from packaging.utils import canonicalize_name
from packaging.version import Version

from tests.supply import bill_of_materials
from tests.supply.dependencies import (
    ALLOWED,
    ALLOWED_EXTRAS,
    BUILD,
    DEVELOPMENT,
    RUNTIME,
    closure,
    licence,
    project,
    read_lock,
    refused,
    stated,
)

EXTRAS = tuple(project()["optional-dependencies"])
OPTIONAL = tuple(extra for extra in EXTRAS if extra != "dev")


@pytest.mark.parametrize("lock", [RUNTIME, DEVELOPMENT, BUILD], ids=lambda path: path.name)
def test_every_package_of_a_lock_has_one_version_and_hashes(lock):
    pins = read_lock(lock)
    assert pins
    for pin in pins.values():
        Version(pin.version)
        assert pin.hashes, pin
        assert all(re.fullmatch("sha256:[0-9a-f]{64}", each) for each in pin.hashes), pin
    # A line that is not read as a package would be one that nobody looks at.
    lines = [line for line in lock.read_text().splitlines() if line and line[0] not in " #-"]
    assert len(lines) == len(pins)


def test_both_locks_agree():
    development = read_lock(DEVELOPMENT)
    for name, pin in read_lock(RUNTIME).items():
        assert development[name] == pin


@pytest.mark.parametrize(
    ("lock", "extras"), [(RUNTIME, ()), (DEVELOPMENT, EXTRAS)], ids=["runtime", "development"]
)
def test_a_lock_is_what_the_project_asks_for_and_no_more(lock, extras):
    pins = read_lock(lock)
    wanted = closure(stated(*extras))
    assert set(wanted) == set(pins)
    for name, requirements in wanted.items():
        for each in requirements:
            assert each.specifier.contains(pins[name].version, prereleases=True), (each, pins[name])


def test_what_is_installed_is_what_is_locked():
    for name, pin in read_lock(DEVELOPMENT).items():
        assert metadata.version(name) == pin.version


def test_what_comes_with_the_service_may_be_used_so():
    for name in read_lock(RUNTIME):
        assert not refused(licence(name), ALLOWED), (name, licence(name))


def test_what_its_extras_bring_may_be_used_so():
    for name in closure(stated(*OPTIONAL)):
        assert not refused(licence(name), ALLOWED_EXTRAS), (name, licence(name))


def test_a_licence_that_is_not_allowed_is_found():
    assert refused("GPL-3.0-only", ALLOWED) == {"GPL-3.0-only"}
    assert refused("MIT AND AGPL-3.0-only", ALLOWED) == {"AGPL-3.0-only"}
    assert refused("MIT OR GPL-3.0-only", ALLOWED) == set()
    assert refused("MPL-2.0 AND (Apache-2.0 OR GPL-2.0-only)", ALLOWED) == set()
    with pytest.raises(LookupError, match="sympy"):
        licence("sympy")  # says BSD, of which there are several


@pytest.fixture(scope="module")
def bill():
    return bill_of_materials.bill()


def test_the_bill_obeys_its_published_schema(bill):
    assert bill_of_materials.faults(json.dumps(bill)) is None
    broken = copy.deepcopy(bill)
    broken["components"][0]["type"] = "thing"
    assert "thing" in bill_of_materials.faults(json.dumps(broken))


def test_the_bill_lists_the_lock_with_hashes_licences_and_who_asks_for_what(bill):
    pins = read_lock(RUNTIME)
    listed = {canonicalize_name(c["name"]): c for c in bill["components"] if c["type"] == "library"}
    assert set(listed) == set(pins)
    for name, component in listed.items():
        assert component["version"] == pins[name].version
        (distribution,) = component["externalReferences"]
        hashes = {f"sha256:{each['content']}" for each in distribution["hashes"]}
        assert hashes == set(pins[name].hashes)
        assert component["licenses"][0]["expression"] == licence(name)
    # Whatever is listed is asked for by something, from the service on.
    edges = {each["ref"]: each.get("dependsOn", []) for each in bill["dependencies"]}
    reached, left = set(), [bill["metadata"]["component"]["bom-ref"]]
    while left:
        reached.add(each := left.pop())
        left += set(edges[each]) - reached
    assert reached == set(edges)
    assert len(edges) == 1 + len(bill["components"])
