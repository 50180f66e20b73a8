"""The terminal summary of a campaign: plain text within 80 columns."""

from finback.campaign import Campaign
from finback.campaign_digest import Digest
from finback.report import phrases
from finback.report.terminal import wrap


def summary(campaign: Campaign, digest: Digest) -> str:
    """Return what a campaign came to, and where its tables lie.

    Lines hold at most 79 columns, except paths, which stay in one piece.
    """
    titles = dict.fromkeys(phrases.clean(source.rig.title) for source in campaign.sources)
    computed = campaign.runs - campaign.found
    rate = f", {computed / campaign.seconds:.3g} a second" if computed and campaign.seconds > 0 else ""
    lines = [line for title in titles for line in wrap(title)]
    told = ", ".join(f"{digest.statuses[name]} {name}" for name in ("ok", "caution", "failed"))
    lines += ["", *wrap(f"{digest.runs} run{'s' * (digest.runs != 1)}: {told}")]
    earlier = f"{campaign.found} were in the ledger, " if campaign.found else ""
    lines += wrap(f"{earlier}{computed} computed in {campaign.seconds:.3g} s{rate}", "  ", "  ")
    if digest.sampled:
        lines += wrap(f"{digest.sampled} needed a Markov chain", "  ", "  ")
    if digest.findings:
        lines += ["", "Findings"]
        for code, count in sorted(digest.findings.items(), key=lambda item: (-item[1], item[0])):
            lines.append(f"  {count:>8}  {code}")
    files = (("Table ", "results.csv"), ("Report", "report.html"))
    return "\n".join(
        [*lines, "", *(f"{name}  {phrases.clean(str(campaign.folder / file), 1000)}" for name, file in files)]
    )
