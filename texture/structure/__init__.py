"""Spatial structure: distance, covariance models and how they are fitted."""

from texture.structure.covariance import Covariance, CovarianceSet, Structure

__all__ = ["Covariance", "CovarianceSet", "Structure"]
