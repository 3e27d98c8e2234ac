"""Scaling, from the flux density of points along a needle to the water use of trees and stands.

Importing this package registers every stage of the scaling chain.
"""

from sapflux.scaling import radial, short_gaps, stands, trees

__all__ = ["radial", "short_gaps", "stands", "trees"]
