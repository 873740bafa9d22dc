"""Here is a run: what eluted, when, how much, and with which spectrum?

    Run ──build_ion_matrix──► IonMatrix ──split_background──► signal + background + noise model
        ──find_ion_peaks──► apex times per ion ──find_components──► Component (spectrum, area, shape, purity)

Not for: reading files (`readers`), naming components (`pipeline_runs` calls the same search as for any query), drawing.
"""
