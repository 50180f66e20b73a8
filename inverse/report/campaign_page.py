"""The page of a campaign: one self-contained HTML file, its pictures inside it, no script."""

from finback.campaign import Campaign
from finback.campaign_digest import Digest
from finback.ledger import Ledger
from finback.report import campaign_view, html

ALT = {
    "h": "h of each run in the order of the tables.",
    "k": "k of each run in the order of the tables, with the median of all dashed. {k}",
    "joint": "R″ of each run in the order of the tables, with the median of all dashed. {joint}",
    "speed": "h of each run against the column {speed}.",
}


def render(campaign: Campaign, digest: Digest, ledger: Ledger) -> str:
    """Return the page of a campaign; the same campaign gives the same bytes."""
    from finback.report import campaign_figures

    seen = campaign_view.build(campaign, digest, ledger)
    told = {trend.name: trend.verdict for trend in seen.trends} | {"speed": seen.speed}
    embedded = {
        picture.name: html.embed(picture, ALT[picture.name].format(**told).strip())
        for picture in campaign_figures.draw(digest)
    }
    template = html.environment().get_template("campaign.html.j2")
    return str(template.render(view=seen, figures=embedded))
