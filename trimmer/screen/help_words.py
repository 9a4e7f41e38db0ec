"""The help of each screen in plain words."""

from __future__ import annotations

TUNING = """\
FIRST THE TURN. Which trim, which way round, how far. The arrow and the bar go the way the top of the \
screw goes. Turn until the bar has reached the mark. Where the tool watches the hand no key is needed: \
hold still, and it reads and goes on.

WITHOUT READING. Upright bars and a broken arrow: nearly there, slowly. All inked: stop. A chequer \
and a cross: that is the other trim. Slanting lines and an arrow that comes back: the wrong way round. \
An hourglass: leave both trims alone for a moment. The bell says the same: one stroke slow, two stop, \
three wrong, four done.

THEN WHY, and what distortion (THD) to expect. It may rise with one turn and fall with the next; that \
is said beforehand.

THE SHAPE. One period as it is over its ideal sine, with the difference made larger. By order: what \
each adds at the crests and what leans in time. Full ink is what the two trims can take away, grey is \
what they cannot. THD by turn runs down to the grey band, the floor: no turn of these trims goes below \
it. What it is made of stands on the sheet at the end.

AT THE BOTTOM: what the tool waits for, how old the reading is, where it comes from, and how many \
readings the book has already. A reading is in the book before it is shown.
"""

SHEET = """\
The sheet says how the session ended, what distortion (THD) is left, what that is made of and what to \
do about each part. All of it is in the book, with every reading and its waveform.

DONE: no turn of these two trims takes THD lower. BEST INSIDE THE STOPS: the best would lie past the \
end of a trim's travel; this is the best that can be reached. NO RESPONSE: neither trim changed \
anything that could be seen. UNSTEADY: the readings did not keep still for long enough.
"""

CAUTIONS = """\
The cautions are general. They take no account of your unit, your bench or your rules: those come first.
"""
