"""One unit's text after preprocessing, by the best means there is.

A ``.i`` file is such a text already. Else the unit's own compiler is asked; where there is none, or it fails or misses
a header, the built-in preprocessor does the work, with what the compiler predefines and its own headers if it says so.
Nothing raises here: what cannot be done becomes a notice, and the unit an empty or shortened text.
"""

from dataclasses import replace

from stepring.gather.text import read_text, reason
from stepring.gather.types import Unit
from stepring.places import Notice
from stepring.read.builtin import preprocess_builtin
from stepring.read.compiler import preprocess_with_compiler, surroundings_of
from stepring.read.markers import absolute_markers, has_markers, marker, split_predefined, under_nearest
from stepring.read.predefined import predefined_for
from stepring.read.types import Preprocessed


def preprocess(unit: Unit, *, data_model: str, allow_compiler: bool = True) -> Preprocessed:
    """The unit's text; ``data_model`` (``LP64``, ``LLP64``, ``ILP32``, ``IP16``) counts where no compiler says more.

    ``allow_compiler`` False runs no program at all.
    """
    try:
        if unit.kind == "preprocessed":
            return _as_it_is(unit)
        if not allow_compiler or not unit.arguments:
            return preprocess_builtin(unit, predefined_for(data_model))
        done = preprocess_with_compiler(unit)
        if isinstance(done, Preprocessed):
            return done
        return _without_compiler(unit, data_model, done)
    except Exception as error:
        text = f"{unit.source} could not be preprocessed: {reason(error)}; it was left out."
        notice = Notice("internal", "warning", text, str(unit.source))
        return Preprocessed(unit, "", {}, False, (notice,))


def _without_compiler(unit: Unit, data_model: str, why: Notice) -> Preprocessed:
    """The built-in preprocessor in place of a compiler that failed on the unit."""
    surroundings = surroundings_of(unit)
    if surroundings is None:
        done = preprocess_builtin(unit, predefined_for(data_model))
        return replace(done, complete=False, notices=(why, *done.notices))
    done = preprocess_builtin(unit, surroundings.predefined, system_folders=surroundings.folders)
    return replace(done, complete=False, predefined=surroundings.predefined, notices=(why, *done.notices))


def _as_it_is(unit: Unit) -> Preprocessed:
    """A preprocessed file's text, its markers in GNU form with absolute files; a marker in front if it has none."""
    text = read_text(unit.source)
    if isinstance(text, Notice):
        return Preprocessed(unit, "", {}, False, (text,))
    if not has_markers(text):
        return Preprocessed(unit, marker(1, str(unit.source)) + text, {}, True)
    predefined, text = split_predefined(text)
    text = absolute_markers(text, under_nearest(unit.directory))
    if not text.startswith("# "):
        text = marker(1, str(unit.source)) + text
    return Preprocessed(unit, text, predefined, True)
