"""The word that is read from three metres: may one more call come in?"""

DOT_ROWS = 5
# Letters of three or five by five dots: only those that the words need.
DOTS = {
    "R": ("##.", "#.#", "##.", "#.#", "#.#"),
    "O": ("###", "#.#", "#.#", "#.#", "###"),
    "M": ("#...#", "##.##", "#.#.#", "#...#", "#...#"),
    "F": ("###", "#..", "##.", "#..", "#.."),
    "U": ("#.#", "#.#", "#.#", "#.#", "###"),
    "L": ("#..", "#..", "#..", "#..", "###"),
    "V": ("#.#", "#.#", "#.#", "#.#", ".#."),
    "E": ("###", "#..", "##.", "#..", "###"),
    "I": ("#", "#", "#", "#", "#"),
    "T": ("###", ".#.", ".#.", ".#.", ".#."),
    "S": ("###", "#..", "###", "..#", "###"),
    "P": ("###", "#.#", "###", "#..", "#.."),
    "0": ("###", "#.#", "#.#", "#.#", "###"),
    "1": (".#", "##", ".#", ".#", ".#"),
    "2": ("###", "..#", "###", "#..", "###"),
    "3": ("###", "..#", "###", "..#", "###"),
    "4": ("#.#", "#.#", "###", "..#", "..#"),
    "5": ("###", "#..", "###", "..#", "###"),
    "6": ("###", "#..", "###", "#.#", "###"),
    "7": ("###", "..#", "..#", "..#", "..#"),
    "8": ("###", "#.#", "###", "#.#", "###"),
    "9": ("###", "#.#", "###", "..#", "###"),
    " ": (".", ".", ".", ".", "."),
}
HALVES = {(False, False): " ", (True, False): "▀", (False, True): "▄", (True, True): "█"}


def dots(word: str) -> list[str]:
    """Returns a word as five rows of dots; letters that no word needs are left out."""
    letters = [DOTS[letter] for letter in word if letter in DOTS]
    return [".".join(rows[row] for rows in letters) for row in range(DOT_ROWS)]


def half_size(word: str) -> list[str]:
    """Returns a word as three rows of half blocks, one cell per dot."""
    rows = dots(word)
    rows.append("." * len(rows[0]))
    return [
        "".join(HALVES[a == "#", b == "#"] for a, b in zip(upper, lower, strict=True))
        for upper, lower in zip(rows[::2], rows[1::2], strict=True)
    ]


def full_size(word: str) -> list[str]:
    """Returns a word as five rows, each dot two cells wide."""
    return ["".join("██" if dot == "#" else "  " for dot in row) for row in dots(word)]
