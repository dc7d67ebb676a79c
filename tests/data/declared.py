"""The type of the `put` fixture: content, name and role of a file in; its bare declaration out."""

from collections.abc import Callable

from carrylab.options import Source

Put = Callable[..., Source]
