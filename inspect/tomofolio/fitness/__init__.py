"""Says what the scan can bear, from the object itself: noise, contrast, blur, artefacts and the smallest void."""

from tomofolio.fitness.assessment import assess

__all__ = ["assess"]
