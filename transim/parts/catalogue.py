"""The parts that a design may name: those shipped with the program, and the user's own."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from importlib import resources
from pathlib import Path

from transim.errors import DesignError, NetlistError
from transim.parts.header import read_part, read_role
from transim.parts.nearest import nearest_name
from transim.parts.part import ROLES, Part

__all__ = ["Catalogue", "load_catalogue", "shipped_folder"]


def shipped_folder() -> Path:
    """Return the folder of the shipped part files.

    Returns
    -------
    Path
        Inside an installed package, or beside the package in a source tree.

    Raises
    ------
    NetlistError
        If neither is there.
    """
    package = Path(str(resources.files("transim")))
    for folder in (package / "_netlists", package.parent / "netlists"):
        if (folder / "junctions").is_dir():
            return folder
    raise NetlistError("the shipped part files are missing; install transim again", file=package)


class Catalogue:
    """Part files by role and name, each read when it is first asked for.

    Parameters
    ----------
    folders : iterable of Path
        Folders with part files in `junctions`, `paths` and `drivers`, or directly. Where two folders have
        a part of the same role and name, the earlier folder's is used.

    Raises
    ------
    DesignError
        If a folder does not exist or has no part file.
    NetlistError
        If a folder has a part twice, or a part file directly in it has no role.
    """

    def __init__(self, folders: Iterable[Path]) -> None:
        self.folders = tuple(Path(folder) for folder in folders)
        self._files: dict[tuple[str, str], Path] = {}
        self._parts: dict[tuple[str, str], Part] = {}
        for folder in self.folders:
            for key, file in _files_of(folder).items():
                self._files.setdefault(key, file)

    def names(self, role: str) -> tuple[str, ...]:
        """Return the names of all parts of a role, sorted.

        Parameters
        ----------
        role : str
            ``junction``, ``path`` or ``driver``.

        Returns
        -------
        tuple of str
            Their names.
        """
        return tuple(sorted(name for known, name in self._files if known == role))

    def find(self, role: str, name: str) -> Part:
        """Return a part.

        Parameters
        ----------
        role : str
            ``junction``, ``path`` or ``driver``.
        name : str
            Its name.

        Returns
        -------
        Part
            The part, read and checked.

        Raises
        ------
        DesignError
            If there is no such part; names the nearest and lists all.
        NetlistError
            If its file cannot be used.
        """
        file = self._files.get((role, name))
        if file is None:
            raise self._unknown(role, name)
        if (role, name) not in self._parts:
            part = read_part(file)
            if part.role != role:
                raise NetlistError(f"the part is a {part.role}, but stands with the {ROLES[role]}", file=file)
            self._parts[role, name] = part
        return self._parts[role, name]

    def __iter__(self) -> Iterator[Part]:
        """Go through all parts, by role and then by name."""
        for role in ROLES:
            for name in self.names(role):
                yield self.find(role, name)

    def __len__(self) -> int:
        """Return how many parts there are."""
        return len(self._files)

    def _unknown(self, role: str, name: str) -> DesignError:
        names = self.names(role)
        others = [other for other in ROLES if (other, name) in self._files]
        return DesignError(
            f"{name} is a {others[0]}, not a {role}" if others else f"there is no {role} part named {name}",
            expected=f"one of {', '.join(names)}" if names else f"a {role} part; there is none",
            found=f'"{name}"',
            nearest=nearest_name(name, names),
        )


def _files_of(folder: Path) -> dict[tuple[str, str], Path]:
    """Return the part files of a folder by role and name."""
    if not folder.is_dir():
        raise DesignError(
            "the folder of parts does not exist" if not folder.exists() else "the parts are no folder",
            expected="a folder with part files (*.cir)",
            found=str(folder),
        )
    found: dict[tuple[str, str], Path] = {}
    entries = [(role, file) for role, name in ROLES.items() for file in sorted((folder / name).glob("*.cir"))]
    for file in sorted(folder.glob("*.cir")):
        role = read_role(file)
        if role is not None:
            entries.append((role, file))
    for role, file in entries:
        other = found.setdefault((role, file.stem), file)
        if other != file:
            raise NetlistError(f"the {role} {file.stem} stands twice, also in {other}", file=file)
    if not found:
        raise DesignError(
            "the folder of parts holds no part file",
            expected=f"files *.cir in it or in its {', '.join(ROLES.values())}",
            found=str(folder),
        )
    return found


def load_catalogue(user_folder: Path | None = None) -> Catalogue:
    """Return the catalogue of shipped parts and, before them, the user's own.

    Parameters
    ----------
    user_folder : Path or None
        The user's folder of part files; its parts take the place of shipped ones of the same name.

    Returns
    -------
    Catalogue
        The parts.

    Raises
    ------
    DesignError
        If the user's folder does not exist or has no part file.
    NetlistError
        If a part stands twice in it.
    """
    shipped = shipped_folder()
    return Catalogue([shipped] if user_folder is None else [user_folder, shipped])
