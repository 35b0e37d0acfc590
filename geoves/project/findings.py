"""Findings of the steps, which know no files, said of the files of region.toml."""

from collections.abc import Sequence

import attrs

from geoves.domain.findings import Finding
from geoves.domain.region import Region


def name_inputs(findings: Sequence[Finding], region: Region) -> tuple[Finding, ...]:
    """The findings with the input's file, as region.toml names it, where a step said only which input it is."""
    return tuple(attrs.evolve(one, file=region.typed_inputs.get(one.file, one.file)) for one in findings)
