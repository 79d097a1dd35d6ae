"""Parsing a reply that has come over a link.

It owns what happens to the link when the reply is none.
"""

from collections.abc import Iterator
from contextlib import contextmanager

from rigctl.errors import FramingError
from rigctl.links.link import Link


@contextmanager
def reading(link: Link) -> Iterator[str]:
    """Parse within this: what is no reply puts the link out of step. Yields the address, for the parsers."""
    try:
        yield link.address
    except FramingError:
        link.mark_out_of_step()
        raise
