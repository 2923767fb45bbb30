"""The built-in example: a town's water meters and a machined bracket, each with a planted fault that must be found."""

from dec.demo.run import Outcome, run

__all__ = ["Outcome", "run"]
