"""Long and short forms of mnemonics: IEEE 488.2, 7.6.1 and SCPI-1999 volume 1, 6.2.1.

The standard prints the short form in capitals: `RANGe` is RANG or RANGE and nothing between.
"""


def forms(printed: str) -> tuple[str, ...]:
    """Return the forms of a mnemonic that may be sent, in capitals."""
    short = "".join(letter for letter in printed if not letter.islower())
    return tuple(dict.fromkeys((printed.upper(), short)))
