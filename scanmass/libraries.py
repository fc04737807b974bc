"""What open3d needs from the system, said in words when it is missing."""

from __future__ import annotations

import importlib
import re
from typing import Any

from scanmass.errors import UserFault

DEBIAN_PACKAGES = {"libGL": "libgl1", "libX11": "libx11-6", "libgomp": "libgomp1"}
"""The shared libraries that open3d links and that a bare system may lack, with the Debian package of each."""


def open3d() -> Any:
    """The open3d module, imported when first asked for (it takes seconds).

    Raises
    ------
    UserFault
        If a system library it links is missing; the message names the packages to install.
    """
    try:
        return importlib.import_module("open3d")
    except (ImportError, OSError) as fault:
        raise missing_library(fault) or fault from fault


def missing_library(fault: BaseException) -> UserFault | None:
    """The fault in a user's words if an import failed for want of a shared library, else None.

    >>> print(missing_library(ImportError("libGL.so.1: cannot open shared object file: No such file or directory")))
    the system library libGL.so.1, which open3d needs, is missing;
    on Debian and Ubuntu: apt-get install libgl1 libx11-6 libgomp1
    """
    match = re.search(r"(lib[\w+-]+)(\.so[.\d]*): cannot open shared object file", str(fault))
    if match is None:
        return None
    name = "".join(match.groups())
    if match[1] in DEBIAN_PACKAGES:
        packages = " ".join(DEBIAN_PACKAGES.values())
        remedy = f"on Debian and Ubuntu: apt-get install {packages}"
        return UserFault(f"the system library {name}, which open3d needs, is missing", allowed=remedy)
    return UserFault(
        f"the system library {name} is missing", allowed="install the package of your system that holds it"
    )
