"""
A whole network, from raw records to the answer
===============================================

Three invented sites with two years of records, three ocean models that disagree, and loads none of which is the true
one. The truth is known here, so the answer can be held against it.
"""

import massfit
from massfit import figures
from massfit.results.citations import citations
from massfit.results.coverage import monthly_coverage
from massfit.results.finished import finished_run
from massfit.results.readings import answer_contours, answer_draws, site_readings

options = massfit.SimulationOptions(sites=3, years=2, sampling="daily", load_members=2, incidents=False, bad_site=False)
simulated = massfit.simulate_network(options, seed=11)
result = massfit.estimate(simulated.network)
print(result)
print(f"hidden: {simulated.truth['amplitude_hpa']:.2f} hPa, peak day {simulated.truth['peak_day']:.0f}")

# %%
# The answer, and what each site alone says of it. ``figures.result_figures(result)`` draws everything that the report
# shows.

run = finished_run(result, command="")
names = [site["id"] for site in run.summary["sites"]]
figures.phasor_plane(
    answer_draws(run), names, *site_readings(run), reference_year=run.summary["reference_year"],
    contours=answer_contours(run),
)  # fmt: skip

# %%
# Which months it rests on.

figures.coverage_calendar(monthly_coverage(run))

# %%
# And what is to be cited for it: the first entries are the analyst's own data, here without a reference.

for each in citations(run)[:6]:
    print(f"{each.part}: {each.what}: {each.text or each.source.key}")
