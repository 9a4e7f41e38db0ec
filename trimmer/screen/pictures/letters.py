"""Block letters that can be read from a metre away.

Drawn dot by dot; a dot is a whole number of half cells wide and of half rows high, so every letter is
made of block characters that all fonts have.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from trimmer.screen.pictures.raster import Mask, told

Alphabet = dict[str, Mask]


def _alphabet(drawing: str) -> Alphabet:
    """Read an alphabet from its drawing: rows of letters, each over its dots."""
    letters: Alphabet = {}
    for group in drawing.strip("\n").split("\n\n"):
        names, *rows = (line.strip() for line in group.strip().splitlines())
        columns = [row.split() for row in rows]
        for name, *dots in zip(names.split(), *columns, strict=True):
            letters[name] = np.array([[dot == "#" for dot in row] for row in dots])
    height = next(iter(letters.values())).shape[0]
    letters[" "] = np.zeros((height, 2), dtype=bool)
    return letters


TALL = _alphabet(
    """
    A      B      C      D      E      F      G      H
    .###.  ####.  .####  ####.  #####  #####  .####  #...#
    #...#  #...#  #....  #...#  #....  #....  #....  #...#
    #...#  #...#  #....  #...#  #....  #....  #....  #...#
    #####  ####.  #....  #...#  ####.  ####.  #..##  #####
    #...#  #...#  #....  #...#  #....  #....  #...#  #...#
    #...#  #...#  #....  #...#  #....  #....  #...#  #...#
    #...#  ####.  .####  ####.  #####  #....  .####  #...#

    I    J      K      L      M      N      O      P
    ###  ...##  #...#  #....  #...#  #...#  .###.  ####.
    .#.  ....#  #..#.  #....  ##.##  ##..#  #...#  #...#
    .#.  ....#  #.#..  #....  #.#.#  ##..#  #...#  #...#
    .#.  ....#  ##...  #....  #.#.#  #.#.#  #...#  ####.
    .#.  ....#  #.#..  #....  #...#  #..##  #...#  #....
    .#.  #...#  #..#.  #....  #...#  #..##  #...#  #....
    ###  .###.  #...#  #####  #...#  #...#  .###.  #....

    Q      R      S      T      U      V      W      X
    .###.  ####.  .####  #####  #...#  #...#  #...#  #...#
    #...#  #...#  #....  ..#..  #...#  #...#  #...#  .#.#.
    #...#  #...#  #....  ..#..  #...#  #...#  #...#  .#.#.
    #...#  ####.  .###.  ..#..  #...#  .#.#.  #.#.#  ..#..
    #.#.#  #.#..  ....#  ..#..  #...#  .#.#.  #.#.#  .#.#.
    #..#.  #..#.  ....#  ..#..  #...#  ..#..  ##.##  .#.#.
    .##.#  #...#  ####.  ..#..  .###.  ..#..  #...#  #...#

    Y      Z      0      1    2      3      4      5
    #...#  #####  .###.  .#.  .###.  ####.  ...#.  #####
    #...#  ....#  #...#  ##.  #...#  ....#  ..##.  #....
    .#.#.  ...#.  #...#  .#.  ....#  ....#  .#.#.  ####.
    ..#..  ..#..  #...#  .#.  ..##.  .###.  #..#.  ....#
    ..#..  .#...  #...#  .#.  .#...  ....#  #####  ....#
    ..#..  #....  #...#  .#.  #....  ....#  ...#.  #...#
    ..#..  #####  .###.  ###  #####  ####.  ...#.  .###.

    6      7      8      9      °    .  -    /      %      +
    .###.  #####  .###.  .###.  ###  .  ...  ....#  ##..#  .....
    #....  ....#  #...#  #...#  #.#  .  ...  ....#  ##.#.  ..#..
    #....  ...#.  #...#  #...#  ###  .  ...  ...#.  ...#.  ..#..
    ####.  ...#.  .###.  .####  ...  .  ###  ..#..  ..#..  #####
    #...#  ..#..  #...#  ....#  ...  .  ...  .#...  .#...  ..#..
    #...#  ..#..  #...#  ....#  ...  .  ...  #....  .#.##  ..#..
    .###.  ..#..  .###.  .###.  ...  #  ...  #....  #..##  .....
    """
)
"""Seven dots high."""

LOW = _alphabet(
    """
    A      B      C      D      E      F      G      H
    .###.  ####.  .####  ####.  #####  #####  .####  #...#
    #...#  #...#  #....  #...#  #....  #....  #....  #...#
    #####  ####.  #....  #...#  ####.  ####.  #..##  #####
    #...#  #...#  #....  #...#  #....  #....  #...#  #...#
    #...#  ####.  .####  ####.  #####  #....  .####  #...#

    I    J      K      L      M      N      O      P
    ###  ...##  #..#.  #....  #...#  #...#  .###.  ####.
    .#.  ....#  #.#..  #....  ##.##  ##..#  #...#  #...#
    .#.  ....#  ##...  #....  #.#.#  #.#.#  #...#  ####.
    .#.  #...#  #.#..  #....  #...#  #..##  #...#  #....
    ###  .###.  #..#.  #####  #...#  #...#  .###.  #....

    Q      R      S      T      U      V      W      X
    .###.  ####.  .####  #####  #...#  #...#  #...#  #...#
    #...#  #...#  #....  ..#..  #...#  #...#  #...#  .#.#.
    #.#.#  ####.  .###.  ..#..  #...#  .#.#.  #.#.#  ..#..
    #..#.  #..#.  ....#  ..#..  #...#  .#.#.  ##.##  .#.#.
    .##.#  #...#  ####.  ..#..  .###.  ..#..  #...#  #...#

    Y      Z      0      1    2      3      4      5
    #...#  #####  .###.  .#.  ####.  ####.  #..#.  #####
    .#.#.  ...#.  #...#  ##.  ....#  ....#  #..#.  #....
    ..#..  ..#..  #...#  .#.  .###.  .###.  #####  ####.
    ..#..  .#...  #...#  .#.  #....  ....#  ...#.  ....#
    ..#..  #####  .###.  ###  #####  ####.  ...#.  ####.

    6      7      8      9      °    .  -    /      %      +
    .###.  #####  .###.  .###.  ###  .  ...  ....#  ##..#  .....
    #....  ....#  #...#  #...#  #.#  .  ...  ...#.  ...#.  ..#..
    ####.  ...#.  .###.  .####  ###  .  ###  ..#..  ..#..  .###.
    #...#  ..#..  #...#  ....#  ...  .  ...  .#...  .#...  ..#..
    .###.  ..#..  .###.  .###.  ...  #  ...  #....  #..##  .....
    """
)
"""Five dots high, where rows are short."""


@dataclass(frozen=True, slots=True)
class Size:
    """A size of letter."""

    alphabet: str
    """``tall`` or ``low``."""
    across: int
    """Half cells to a dot."""
    down: int
    """Half rows to a dot."""

    @property
    def rows(self) -> int:
        """Rows of cells a line of letters takes."""
        return -(-len(self._letters["A"]) * self.down // 2)

    @property
    def air(self) -> int:
        """Rows to leave free under a line that fills its last row."""
        return 0 if len(self._letters["A"]) * self.down % 2 else 1

    @property
    def _letters(self) -> Alphabet:
        return TALL if self.alphabet == "tall" else LOW

    def mask(self, text: str) -> Mask:
        """Draw a line of text, one dot between letters; unknown characters are left out."""
        glyphs = [self._letters[letter] for letter in text.upper() if letter in self._letters]
        gap = np.zeros((self._letters["A"].shape[0], 1), dtype=bool)
        parts = [part for glyph in glyphs for part in (glyph, gap)][:-1]
        dots = np.hstack(parts) if parts else gap
        fine = dots.repeat(self.down, axis=0).repeat(self.across, axis=1)
        return np.pad(fine, ((0, fine.shape[0] % 2), (0, fine.shape[1] % 2)))

    def width(self, text: str) -> int:
        """Cells a line of text takes."""
        return int(self.mask(text).shape[1]) // 2


SIZES = (
    Size("tall", 6, 3),
    Size("tall", 4, 2),
    Size("tall", 3, 2),
    Size("tall", 3, 1),
    Size("tall", 2, 1),
    Size("low", 2, 1),
)
"""From large to small."""


def letters(text: str, size: Size) -> list[str]:
    """Draw a line of text in block letters, one string for each row of cells."""
    return told(size.mask(text))
