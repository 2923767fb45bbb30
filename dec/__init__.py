"""Discrete exterior calculus for meshes and graphs: do the flows balance, do the differences close?

The public names are listed in ``__init__.pyi``; each is imported when it is first used.
"""

import lazy_loader

__getattr__, __dir__, __all__ = lazy_loader.attach_stub(__name__, __file__)
