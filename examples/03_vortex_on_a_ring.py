"""A vortex on a ring: curl-free on every face, yet no potential exists, because of the hole.

The same from the command line, in the top folder of the project:

    dec loops meshes/annulus.vtu --field vortex
"""

import math
from fractions import Fraction
from pathlib import Path

import dec

MESHES = Path(__file__).parent.parent / "meshes"


def main() -> None:
    """Audit the circulation of a field round faces, boundaries and the hole; then decide Stokes exactly."""
    part = dec.read(MESHES / "annulus.vtu")
    audit = dec.loops(part, field="vortex")
    print(audit)
    faces, holes = audit.table("faces"), audit.table("holes")
    print(f"{int(faces['holds'].sum())} of {len(faces)} faces close within the rule's own error")
    print(f"round the hole: {abs(holes['value'][0]):.4f}; 2 pi is {2 * math.pi:.4f}")

    K = part.complex
    line_integrals = dec.integrate_field(K, part.field("vortex").values)
    everything = K.region(range(K.counts[2]))
    finding = dec.check_stokes(everything, line_integrals)
    print("faces add up to the boundary exactly:", finding.holds, finding.difference == Fraction(0))


if __name__ == "__main__":
    main()
