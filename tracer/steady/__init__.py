"""Boundaries and regions of drifting particles in steady fields, from the Hamiltonian alone; no integration in time.

At fixed mu and K a particle stays on a level curve of ``H(r, phi) = W(mu, B_m(K; r, phi)) + q Phi`` (Northrop 1963;
Roederer 1970). What reaches a place is then a question about the picture of those curves. It is answered in four
steps, in the coordinates (ln r, phi), in which the annulus is a strip and angles are kept:

1. All stationary points: Newton's method from every patch of a grid in which both slopes of H change sign, and beside
   each nearly degenerate point once more. The extrema must outnumber the saddles by what the turns of grad H along the
   two boundary circles say (Poincare's index), else the grid is made finer. Also all points where H is stationary
   along a boundary circle.
2. The critical level curves: four branches from each saddle, those that touch a boundary from inside, those that enter
   at an end of the source sector. They are followed by steps along the tangent and Newton's method along the gradient.
   A step that turned too far is taken back; so a walk cannot change over to a neighbouring branch, which runs the
   other way.
3. Between two critical levels all curves are alike. So the region beside a curve is that of one level curve half way
   to the next critical level, followed backward in time; likewise along the outer boundary between two curves.
4. A place belongs to the region beside the first curve outward of it at its local time. Where it lies as near to a
   curve as that may bulge out between two points, its own level curve is followed.
"""

from tracer.steady.kinds import CurveEnd, CurveKind, PointKind, Region
from tracer.steady.records import Boundaries, Curves, Regions, StagnationPoints
from tracer.steady.solve import boundaries, boundaries_from_invariants, classify, regions

__all__ = [
    "Boundaries",
    "CurveEnd",
    "CurveKind",
    "Curves",
    "PointKind",
    "Region",
    "Regions",
    "StagnationPoints",
    "boundaries",
    "boundaries_from_invariants",
    "classify",
    "regions",
]
