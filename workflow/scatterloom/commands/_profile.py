"""Where the jobs of a run are sent: this machine, Slurm, or what a folder of the user says."""

from __future__ import annotations

import importlib.util
import shutil
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from ruamel.yaml import YAML
from ruamel.yaml.error import YAMLError

from scatterloom.errors import BadInput, EnvironmentProblem

PROFILES = ("laptop", "slurm")
"""Names of the profiles in `workflow/profiles/`."""

_HERE = ("local", "touch", "dryrun")
"""Executors of the workflow engine that need no package of their own."""


@dataclass(frozen=True)
class Profile:
    """A profile of the workflow engine.

    Attributes
    ----------
    name : str
    folder : Path
    executor : str
        What starts the jobs: "local", "slurm", or a plugin of the engine by its name.
    """

    name: str
    folder: Path
    executor: str

    @property
    def remote(self) -> bool:
        """Whether jobs run on other machines, which have memory and time limits of their own."""
        return self.executor not in _HERE

    @property
    def slurm(self) -> bool:
        """Whether jobs are handed to Slurm."""
        return self.executor == "slurm"


def find_profile(given: str, profiles: Path) -> Profile:
    """Return a profile, by name or by the path of its folder, if what it needs is there.

    Parameters
    ----------
    given : str
        One of `PROFILES`, or a folder with a `config.yaml`.
    profiles : Path
        Folder of the profiles by name.

    Raises
    ------
    BadInput
        If there is no such profile or its file is not readable.
    EnvironmentProblem
        If the package or the programs that it needs are not installed.
    """
    folder = profiles / given if given in PROFILES else Path(given).absolute()
    path = folder / "config.yaml"
    content = _read(given, path)
    executor = content.get("executor", "local")
    if not isinstance(executor, str):
        raise BadInput(f"{path}: executor is not the name of one\n  found: {executor!r}")
    profile = Profile(folder.name, folder, executor)
    if profile.remote:
        package = f"snakemake-executor-plugin-{executor}"
        if importlib.util.find_spec(package.replace("-", "_")) is None:
            raise EnvironmentProblem(
                f"the profile {profile.name} needs the package {package}, which is not "
                "installed; add it to .venv with pip"
            )
    if profile.slurm and shutil.which("sbatch") is None:
        raise EnvironmentProblem(
            f"the profile {profile.name} needs Slurm, but there is no program sbatch here\n"
            "  hint: run it on a login node; load the site's module for Slurm if there is one"
        )
    return profile


def _read(given: str, path: Path) -> dict[str, Any]:
    try:
        content = YAML(typ="safe", pure=True).load(path.read_text(encoding="utf-8"))
    except OSError:
        raise BadInput(
            f"no profile {given!r}\n  hint: one of {', '.join(PROFILES)}, or a folder that "
            "holds a config.yaml of the workflow engine"
        ) from None
    except (YAMLError, UnicodeDecodeError) as error:
        text = str(error).split("\n", 1)[0]
        raise BadInput(f"{path}: not a profile ({text})") from None
    if not isinstance(content, dict):
        raise BadInput(f"{path}: not a profile (it holds no keys)")
    return content
