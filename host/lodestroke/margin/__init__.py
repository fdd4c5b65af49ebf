"""What a rig can do and how far it is from harm, by calculation: before any power."""

from .price import price
from .proof import prove_plan, prove_static, strokes

__all__ = ["price", "prove_plan", "prove_static", "strokes"]
