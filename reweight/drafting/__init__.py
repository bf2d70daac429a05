"""A first study from data files: what they show, how sure that is, and what is left for a person to say."""

from reweight.drafting.draft import Draft, draft_studies
from reweight.drafting.guess import Guess, Sureness
from reweight.drafting.writing import study_text

__all__ = ["Draft", "Guess", "Sureness", "draft_studies", "study_text"]
