"""The invented demo review, played through the real flow."""

from treering.demo.play import lay_out, play

__all__ = ["lay_out", "play"]
