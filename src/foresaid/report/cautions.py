"""What has to stand beside every score of a person."""

from __future__ import annotations

CAUTIONS = (
    "A score is evidence about a record, not about a person, and no investment advice.",
    "Small records cannot tell skill from luck, and the best of many looks good by luck alone.",
    "Before naming people: editorial and legal review under local law, and an offer to reply.",
)
