"""The main job as one call: read a design, reduce it, check it, write everything a backend needs into a folder."""

from hubokit.preparation.job import Prepared, prepare

__all__ = ["Prepared", "prepare"]
