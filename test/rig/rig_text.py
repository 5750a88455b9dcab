"""The text of good rig files, to be changed one place at a time."""

from suspended_ctrl.rig.shared_files import config_folder

BAY_HEAD = (config_folder() / 'rigs' / 'bay_head.yaml').read_text()
SEAM_HEAD = (config_folder() / 'rigs' / 'seam_head.yaml').read_text()
# Two rotors that may stand still: as good, and read in a third of the time.
SHORT = (BAY_HEAD[:BAY_HEAD.index('  - name: r3')] + BAY_HEAD[BAY_HEAD.index('tether:'):]).replace(
    'speed_min_rad_s: 170', 'speed_min_rad_s: 0')


def changed(text: str, old: str, new: str) -> str:
    """Replace the first ``old``, which must be there."""
    assert old in text
    return text.replace(old, new, 1)


def line_of(text: str, part: str) -> int:
    """Line, from 1, that first holds ``part``."""
    return text[:text.index(part)].count('\n') + 1
