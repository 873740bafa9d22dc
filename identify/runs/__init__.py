"""Here is a run: what eluted, when, how much, and with which spectrum?

    Run ──traces──► ion traces, background, noise ──overload──► solvent fronts taken out ──ion_peaks──► apex of each ion peak
        ──clusters──► moments of elution ──shapes, components──► Component (spectrum, area, purity)
        ──hidden, flanks──► what the shapes left over: peaks without a common apex, fronts, tails ──kinds──► air, bleed …

Not for: reading files (`readers`), naming components (`pipeline.runs` calls the same search as for any query), drawing.
"""
