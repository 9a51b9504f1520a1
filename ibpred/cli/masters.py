"""``ibpred masters``: the master integrals."""

from __future__ import annotations

import click

from ibpred.cli.common import Shared, emit, open_chain, open_joint, several_families


@click.command()
@several_families
def masters(shared: Shared) -> None:
    """Find the master integrals.

    Of several families the common ones: sectors that agree, also after a crossing that a file
    declares, share their masters. For one family the masters of each sector are counted a second
    time, as critical points of U + F.
    """
    from ibpred.report.json_common import common_masters_data
    from ibpred.report.json_tables import counts_data, masters_data
    from ibpred.report.text import common_masters_text, counts_text, masters_text

    if shared.others:
        with open_joint(shared) as joint:
            data = common_masters_data(joint.members, joint.masters())
        emit(shared, data, lambda: common_masters_text(data))
    else:
        with open_chain(shared) as chain:
            data = masters_data(chain.definition, chain.masters())
            chosen, by_order = chain.masters().exchanged()
            if chosen:
                data["chosen"] = {"masters": chosen, "instead_of": by_order}
            data["independent_count"] = counts_data(chain.definition, chain.counts())
        emit(shared, data, lambda: f"{masters_text(data)}\n{counts_text(data['independent_count'])}")
