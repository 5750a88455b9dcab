"""The nearest allowed key to one that is not, and the unit that a key's name states."""

from collections.abc import Collection
from difflib import get_close_matches

UNIT_WORDS = {
    'kg_m2': 'kilogram square metres', 'n_s_per_m': 'newton seconds per metre',
    'n_per_m': 'newtons per metre', 'n_s2': 'newtons per (rad/s)^2',
    'nm_s2': 'newton metres per (rad/s)^2', 'rad_s': 'radians per second',
    'rad_s2': 'radians per second squared', 'm_s2': 'metres per second squared',
    'm_s': 'metres per second', 'm2': 'square metres', 'kg': 'kilograms', 'hz': 'hertz',
    'rad': 'radians', 'deg': 'degrees', 'nm': 'newton metres', 'n': 'newtons', 'm': 'metres',
    's': 'seconds', 'seconds': 'seconds', 'fraction': 'a fraction of one',
}
# The units of the keys above and those that people write instead.
_UNIT_TOKENS = frozenset((
    'kg', 'g', 'mg', 't', 'lb', 'lbs', 'oz', 'm', 'mm', 'cm', 'km', 'um', 'in', 'inch',
    'ft', 's', 'ms', 'us', 'min', 'rad', 'mrad', 'deg', 'degrees', 'degree', 'hz', 'khz',
    'rpm', 'rps', 'n', 'kn', 'mn', 'lbf', 'nm', 'nmm', 'm2', 'cm2', 'mm2', 's2', 'kgm2',
    'gmm2', 'per', 'metres', 'meters', 'millimetres', 'seconds', 'newtons', 'kilograms',
    'grams', 'radians', 'hertz',
))
# Similarity from which a key counts as a slip of another; difflib's own default.
_SIMILAR = 0.6


def _split(key: str) -> tuple[str, str]:
    """Stem and unit of a key, the unit empty where there is none."""
    words = key.lower().split('_')
    end = len(words)
    while end > 1 and words[end - 1] in _UNIT_TOKENS:
        end -= 1
    return '_'.join(words[:end]), '_'.join(words[end:])


def unit_words(key: str) -> str:
    """Say the unit that ``key`` ends in, in words; empty if it states none."""
    words = key.split('_')
    for start in range(1, len(words)):
        said = UNIT_WORDS.get('_'.join(words[start:]))
        if said:
            return said
    return ''


def nearest_key(key: str, allowed: Collection[str]) -> str | None:
    """Key of ``allowed`` that ``key`` most likely means: same stem, else similar letters."""
    stem, _ = _split(key)
    same = [name for name in allowed if _split(name)[0] == stem]
    if same:
        return (get_close_matches(key, same, 1, 0.0) or same)[0]
    close = get_close_matches(key.lower(), list(allowed), 1, _SIMILAR)
    return close[0] if close else None


def unknown_key_hint(key: str, allowed: Collection[str]) -> str:
    """
    Say what may stand in the place of a key that is not allowed.

    Parameters
    ----------
    key : str
        As written.
    allowed : collection of str
        Keys that may stand there.

    Returns
    -------
    str
        The key that was probably meant, with its unit, or every key there is.

    """
    near = nearest_key(key, allowed)
    if near is None:
        return 'unknown key, allowed here: ' + ', '.join(allowed)
    stem, unit = _split(key)
    said = unit_words(near)
    if said and _split(near)[0] == stem:
        wrong = 'unknown unit' if unit else 'the unit is missing'
        return f'{wrong}, did you mean {near} (in {said})?'
    return f'unknown key, did you mean {near}' + (f' (in {said})?' if said else '?')
