import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from treering import effects
from treering.errors import AnalysisError


def test_handbook_classroom_trial_cl01(cases, agree):
    data = cases["CL01"]["data"]
    events, total, other_events, other_total = data["rows"][0]
    size = round((total + other_total) / data["clusters"], data["round_mean_size"])
    factor = effects.design_effect(size, data["icc"])["design_effect"]
    first = effects.effective_numbers(total, factor, events=events)
    second = effects.effective_numbers(other_total, factor, events=other_events)
    agree(
        "CL01",
        {
            "mean_size": size,
            "deff": factor,
            "e1": first["events"],
            "n1": first["total"],
            "e2": second["events"],
            "n2": second["total"],
        },
    )


def test_clusters_of_thirty():
    # 1 + 29*0.02 = 1.58; 1200/1.58 = 759 (by hand).
    factor = effects.design_effect(30, 0.02)["design_effect"]
    assert factor == pytest.approx(1.58)
    assert round(effects.effective_numbers(1200, factor)["total"]) == 759


def test_the_design_effect_matches_the_variance_of_simulated_cluster_means():
    # Seeded simulation of a mean over clusters of varying size with exchangeable correlation 0.1; Eldridge et
    # al. 2006 for the variance of the plain mean over people, with cv from these very sizes.
    rng = np.random.default_rng(5)
    sizes = np.array([5, 10, 15, 30, 60] * 4)
    runs, icc = 20000, 0.1
    between = rng.normal(0, np.sqrt(icc), (runs, len(sizes)))
    within = rng.normal(0, 1, (runs, len(sizes))) * np.sqrt((1 - icc) / sizes)
    means = ((between + within) * sizes).sum(axis=1) / sizes.sum()
    factor = effects.design_effect(sizes.mean(), icc, size_variation=sizes.std() / sizes.mean())[
        "design_effect"
    ]
    assert means.var() * sizes.sum() == pytest.approx(factor, rel=0.03)


@settings(deadline=None)
@given(size=st.floats(1, 500), icc=st.floats(0, 1), variation=st.floats(0, 2))
def test_clustering_never_adds_information(size, icc, variation):
    assert effects.design_effect(size, icc, size_variation=variation)["design_effect"] >= 1


def test_a_table_mixes_clusters_and_people(counts):
    table = counts((63, 295, 84, 330), (9, 80, 12, 81), index=["Alder", "Birch"])
    table["mean_cluster_size"], table["intracluster_correlation"] = [29.8, np.nan], [0.02, np.nan]
    found = effects.effective_table(table)
    assert found["design_effect"].tolist() == [pytest.approx(1.576), 1]
    assert found.loc["Birch", "intervention_total"] == 80
    assert found.loc["Alder", "comparator_total"] == pytest.approx(330 / 1.576)
    # Dividing all counts by the design effect multiplies the variance by it and keeps the odds ratio.
    raw, effective = (effects.effect_sizes(rows, "odds-ratio").loc["Alder"] for rows in (table, found))
    assert effective["estimate"] == pytest.approx(raw["estimate"], rel=1e-12)
    inflated = effects.inflated_variance(raw["variance"], 1.576)
    assert effective["variance"] == pytest.approx(inflated["variance"], rel=1e-12)


def test_a_cluster_trial_with_only_a_reported_effect_is_listed_and_not_divided(counts):
    table = counts((63, 295, 84, 330), (np.nan, 295, np.nan, 330), index=["Alder", "Birch"])
    table["mean_cluster_size"], table["intracluster_correlation"] = 29.8, 0.02
    found = effects.effective_table(table)
    assert found["design_effect"].tolist() == [pytest.approx(1.576), 1]
    assert found.loc["Birch", "intervention_total"] == 295
    assert found.attrs["taken_as_reported"] == ("Birch",)


def test_means_keep_their_sd_and_lose_people(means):
    table = means((5, 2, 158, 6, 2.5, 316), index=["Alder"])
    table["mean_cluster_size"], table["intracluster_correlation"] = 30, 0.02
    found = effects.effective_table(table).loc["Alder"]
    assert (found["intervention_total"], found["comparator_total"]) == (
        pytest.approx(100),
        pytest.approx(200),
    )
    assert (found["intervention_sd"], found["comparator_mean"]) == (2, 6)


def test_varying_cluster_sizes_inflate_further(counts):
    table = counts((63, 295, 84, 330), index=["Alder"])
    table["mean_cluster_size"], table["intracluster_correlation"] = 30, 0.02
    table["cluster_size_variation"] = 0.5
    # Eldridge et al. 2006: 1 + (1.25*30 - 1)*0.02 = 1.73, by hand.
    assert effects.effective_table(table)["design_effect"].tolist() == [pytest.approx(1.73)]


@pytest.mark.parametrize(
    ("size", "icc", "field"),
    [(29.8, np.nan, "intracluster_correlation"), (0.5, 0.02, "mean_cluster_size"), (20, 1.2, "intracluster")],
)
def test_faulty_cluster_figures_are_refused(counts, size, icc, field):
    table = counts((63, 295, 84, 330), index=["Alder"])
    table["mean_cluster_size"], table["intracluster_correlation"] = size, icc
    with pytest.raises(AnalysisError, match=f"trial Alder: {field}"):
        effects.effective_table(table)


def test_faulty_single_figures_are_refused():
    with pytest.raises(AnalysisError, match="trial Alder: intracluster_correlation"):
        effects.design_effect(20, -0.1, trial="Alder")
    with pytest.raises(AnalysisError, match="trial Alder: intracluster_correlation"):
        effects.design_effect(20, 1.1, trial="Alder")
    with pytest.raises(AnalysisError, match="trial Alder: factor"):
        effects.effective_numbers(100, 0.9, trial="Alder")
    with pytest.raises(AnalysisError, match="trial Alder: variance"):
        effects.inflated_variance(0, 1.2, trial="Alder")
    with pytest.raises(AnalysisError, match="intracluster_correlation: the column is missing"):
        effects.effective_table(effects.corrected_counts(_one_row()).assign(mean_cluster_size=20))


def _one_row():
    import pandas as pd

    return pd.DataFrame(
        [[1, 20, 2, 20]],
        columns=["intervention_events", "intervention_total", "comparator_events", "comparator_total"],
    )
