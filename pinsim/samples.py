"""sample:NAME - the scenes and designs that come with pinsim, found wherever it is installed."""

from pathlib import Path

from pinsim.errors import PinsimError, nearest

_HERE = Path(__file__).resolve().parent
PREFIX = "sample:"


def folder() -> Path:
    """Return the folder of the samples: inside an installed package, beside it in a checkout."""
    inside = _HERE / "sample_scenes"
    return inside if inside.is_dir() else _HERE.parent / "sample_scenes"


def names(kind: str) -> dict[str, Path]:
    """Return the sample files of a kind, "scene" or "camera", by name."""
    if kind == "camera":
        return {file.stem: file for file in sorted((folder() / "cameras").glob("*.toml"))}
    return {file.parent.name: file for file in sorted(folder().glob("*/scene.toml"))}


def resolve(path: str | Path, kind: str, error: type[PinsimError]) -> Path:
    """Return the file that a path or sample:NAME stands for; raise `error` for an unknown NAME."""
    text = str(path)
    if not text.startswith(PREFIX):
        return Path(path)
    name = text.removeprefix(PREFIX)
    known = names(kind)
    if name not in known:
        raise error(
            f"no sample {kind} is called {name!r}.{nearest(name, known)} "
            f"Known: {', '.join(PREFIX + one for one in known)}."
        )
    return known[name]
