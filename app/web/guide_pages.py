"""The pages of the guide: which there are, and the link to one beside a panel's question."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Final

from markupsafe import Markup


@dataclass(frozen=True)
class Page:
    """A page of the guide: its address, its title, and the question that it answers."""

    slug: str
    title: str
    question: str


PAGES: Final = (
    Page("walk", "The job, once through", "How do I get from a boule to a part that is cut right?"),
    Page("crystal", "Crystal and frame", "To which axes does a number refer?"),
    Page("tensor", "The tensor and its locked cells", "Which of the nine cells does symmetry leave free?"),
    Page("picture", "The picture and turning", "What do the surfaces show, and what moves when I drag?"),
    Page("readings", "From readings to a tensor", "What do my bars say, and how sure is it?"),
    Page("closer", "Looking closer", "Can I trust the fit, the symmetry and every reading?"),
    Page("next-cuts", "Next cuts", "Which bar should I cut next?"),
    Page("bars", "Bars, faces and twins", "What did I really measure on this piece?"),
    Page("consequences", "What follows for a part", "What will the part do?"),
    Page("orientation", "Sightings and stage", "How does the crystal sit, and how do I bring a plane to the blade?"),
    Page("search", "Finding a direction, and miscut", "Where is the wanted value, and what does a miscut cost?"),
    Page("series", "Series", "How does it all move with temperature?"),
    Page("hand-over", "Sheets, files and kept work", "What goes to the workshop, and where is my work?"),
    Page("published", "Held against print", "Does it get what was printed elsewhere?"),
    Page("limits", "What it does not do", "Where must I not trust it?"),
    Page("changes", "Changes", "What is new?"),
)


def find_page(slug: str) -> Page | None:
    """The page at an address, or None."""
    return next((page for page in PAGES if page.slug == slug), None)


def link_page(slug: str) -> Markup:
    """A link from a panel to its page: what is computed there, from which source, and what it refuses."""
    page = find_page(slug)
    if page is None:
        raise LookupError(f"the guide has no page {slug}")
    return Markup('<a class="guide-link" href="/guide/{}" title="{}">Guide</a>').format(slug, page.title)
