"""The rig file of a simulated bench: the given one, with the addresses at which its twins are reached.

Pure text work: whatever else people wrote stays as it was.
"""

from collections.abc import Mapping

from rigctl.files.rig import Rig


def rig_text_with_addresses(rig: Rig, addresses: Mapping[str, str]) -> str:
    """Return the text of a rig file in which only the values of `at:` differ.

    Parameters
    ----------
    addresses
        The address to write, by the address that stands in the rig.
    """
    lines = rig.text.splitlines(keepends=True)
    entries = {rig.place("instruments", name, "at"): entry for name, entry in rig.instruments.items()}
    # from the end, so that a longer address does not move those before it on its line
    for (line, column), entry in sorted(entries.items(), key=lambda item: item[0], reverse=True):
        head, tail = lines[line - 1][: column - 1], lines[line - 1][column - 1 :]
        # written without quotes, a comma ends a value between braces
        plain_comma = tail.startswith(entry.at) and "," in addresses[entry.at]
        written = f'"{addresses[entry.at]}"' if plain_comma else addresses[entry.at]
        lines[line - 1] = head + tail.replace(entry.at, written, 1)
    return "".join(lines)
