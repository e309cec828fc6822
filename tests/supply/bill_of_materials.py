"""The bill of materials of the service, as CycloneDX JSON.

``python -m tests.supply.bill_of_materials > molwright.cdx.json``, in an environment made from
``requirements-dev.lock``: every package of ``requirements.lock`` with its hashes (which the
well-kept generator reads), its licence, and who asks for it (which the installed packages
tell); and the data tables that are packaged with the service. Checked against the published
schema before it is written.
"""

from __future__ import annotations

import json
import subprocess
import sys
from pathlib import Path
from typing import Any

from cyclonedx.schema import OutputFormat, SchemaVersion
from cyclonedx.validation import make_schemabased_validator
from packaging.utils import canonicalize_name

from service import __version__
from tests.supply.dependencies import (
    PROJECT,
    RUNTIME,
    closure,
    licence,
    read_lock,
    requirements,
    stated,
)

TABLES = {
    "atomic_weights": "Apache-2.0",
    "vapour_pressures": "MIT",
    "property_data": "MIT AND 0BSD",
}
"""The packaged tables of ``core/substances``, and what they come under."""


def generated() -> dict[str, Any]:
    """Return what the generator makes of the lock alone."""
    done = subprocess.run(
        [
            Path(sys.executable).with_name("cyclonedx-py"),
            "requirements",
            "--pyproject=pyproject.toml",
            "--spec-version=1.6",
            "--output-reproducible",
            RUNTIME.name,
        ],
        cwd=PROJECT,
        check=True,
        capture_output=True,
    )
    made: dict[str, Any] = json.loads(done.stdout)
    return made


def bill() -> dict[str, Any]:
    """Return the bill of materials."""
    made = generated()
    root = made["metadata"]["component"]
    root |= {"version": __version__, "purl": f"pkg:pypi/molwright@{__version__}"}
    pinned = read_lock(RUNTIME)
    wanted = closure(stated())
    references = {}
    for component in made["components"]:
        name = canonicalize_name(component["name"])
        references[name] = component["purl"]
        component["bom-ref"] = component["purl"]
        component["licenses"] = [{"expression": licence(name), "acknowledgement": "declared"}]
        component["description"] = "locked in requirements.lock"
    tables = []
    for name, expression in TABLES.items():
        assert list(PROJECT.glob(f"core/substances/{name}.*")), name
        tables.append(
            {
                "type": "data",
                "bom-ref": f"data:{name}",
                "name": name,
                "version": __version__,
                "description": "packaged with the service; every value names its source",
                "licenses": [{"expression": expression, "acknowledgement": "declared"}],
            }
        )
    made["components"] += tables

    def edges(asked: list[Any]) -> list[str]:
        return sorted({references[canonicalize_name(each.name)] for each in asked})

    direct = edges(stated()) + [table["bom-ref"] for table in tables]
    made["dependencies"] = [
        {"ref": root["bom-ref"], "dependsOn": direct},
        *(
            {
                "ref": references[name],
                "dependsOn": edges(
                    requirements(name, {extra for one in wanted[name] for extra in one.extras})
                ),
            }
            for name in sorted(pinned)
        ),
        *({"ref": table["bom-ref"]} for table in tables),
    ]
    return made


def faults(text: str) -> str | None:
    """Return what the published schema of CycloneDX 1.6 finds at fault in a bill, if anything."""
    found = make_schemabased_validator(OutputFormat.JSON, SchemaVersion.V1_6).validate_str(text)
    return None if found is None else str(found)


def main() -> None:
    """Write the bill to standard output, or say why it is none."""
    text = json.dumps(bill(), indent=1, ensure_ascii=False) + "\n"
    if fault := faults(text):
        sys.exit(fault)
    sys.stdout.write(text)


if __name__ == "__main__":
    main()
