"""Real campaigns that nobody here made: what is right is said, and nothing of what is called wrong.

The truths are those of shared campaigns/README.md, measured there independently of this program (ICC one-way
with unequal sizes, CUSUM change point, effective number by Geyer's sequence within hosts). VM noise dataset
of Freischuetz et al., TUNA, EuroSys 2025 (CC-BY 4.0); Scheuner & Leitner, IEEE CLOUD 2018 (CC-BY 4.0).
"""

import json
import shutil

import pytest
from campaigns_made import runaudit

AZURE = """
[campaign]
title = "Measured elsewhere"

[landing]
paths = ["results"]
match = ["*.csv"]
settle = "100ms"

[record]
id = "run_id"
started = "started"
finished = "finished"

[responses.value]
at = "value"
scale = "log"
margin = 0.02

[order]
by = "started"
"""
BY_HOST = '[nuisance]\nhost = "host"\n'
HOST_EFFECT = AZURE + BY_HOST + '[factors]\nbenchmark = "benchmark"\n'
DAILY_CYCLE = AZURE + BY_HOST
INDEPENDENT = AZURE + BY_HOST
WITHIN_HOSTS = AZURE + '[factors]\nhost = "host"\n'
"""Hosts as cells: then the effective number is that in time, within hosts."""
ITERATIONS = """
[campaign]
title = "Machines, three iterations each"

[landing]
paths = ["results"]
match = ["*.csv"]
settle = "100ms"

[record]
id = "run_id"

[responses.md]
at = "md_sim_duration_s"
scale = "log"
margin = 0.02

[responses.sysbench]
at = "sysbench_cpu_single_s"
scale = "log"
margin = 0.02

[responses.fio]
at = "fio_4k_seq_write_iops"
scale = "log"
margin = 0.02

[responses.wordpress]
at = "wordpress_s1_response_ms"
scale = "log"
margin = 0.02

[factors]
source = "source"

[nuisance]
host = "host"
iteration = "sequence"
"""
LARGEST = "rmit-combined_v3_aws_m3.large"


def told(folder, shared_folder, name, plan):
    """Gather a campaign and return what the commands say of it."""
    (folder / "results").mkdir()
    (folder / "plan.toml").write_text(plan)
    shutil.copy(shared_folder / "campaigns" / f"{name}.csv", folder / "results")
    path = folder / "plan.toml"
    done = runaudit(path, "gather")
    assert done.returncode == 0, done.stderr
    assert " 0 refused" in done.stderr
    documents = {
        command: json.loads(runaudit(path, command, "--json").stdout)
        for command in ("warnings", "audit", "evidence", "status")
    }
    return documents | {"text": runaudit(path, "warnings", "--at-least", "note").stdout}


@pytest.fixture(scope="module")
def host_effect(tmp_path_factory, shared_folder):
    return told(tmp_path_factory.mktemp("host"), shared_folder, "azure_host_effect", HOST_EFFECT)


@pytest.fixture(scope="module")
def daily_cycle(tmp_path_factory, shared_folder):
    return told(tmp_path_factory.mktemp("cycle"), shared_folder, "azure_daily_cycle", DAILY_CYCLE)


@pytest.fixture(scope="module")
def independent(tmp_path_factory, shared_folder):
    return told(tmp_path_factory.mktemp("independent"), shared_folder, "azure_independent", INDEPENDENT)


@pytest.fixture(scope="module")
def iterations(tmp_path_factory, shared_folder):
    return told(tmp_path_factory.mktemp("iterations"), shared_folder, "ec2_vm_iterations", ITERATIONS)


def standing(documents, *, above_note=False):
    return [
        one
        for one in documents["warnings"]["warnings"]
        if one["state"] == "standing" and not (above_note and one["grade"] == "note")
    ]


def findings(documents, **wanted):
    return [
        one for one in documents["audit"]["findings"] if all(one[key] == wanted[key] for key in wanted)
    ]  # fmt: skip


def worth(documents, response, **cell):
    """Return the effective number of a cell."""
    (found,) = [
        one["n_effective"]
        for one in documents["evidence"]["responses"][response]["cells"]
        if all(one["cell"][key] == level for key, level in cell.items())
    ]
    return found


# azure_host_effect: one host steps by −37.5 % in one of two benchmarks, on 2023-06-08.


def test_the_step_is_named_by_host_and_dated(host_effect):
    """The leading warning is of `value` on the host that stepped, since the runs around the step."""
    (one,) = [w for w in standing(host_effect, above_note=True) if w["response"] == "value"]
    assert (one["kind"], one["along"], one["level"]) == ("drift", "host", "eastus-B8ms-long-1")
    assert "8 Jun" in one["message"]
    assert one["since_low"] <= 250 <= one["since_high"] or 200 <= one["since"] <= 330


def test_the_step_is_one_warning(host_effect):
    """No second fault beside it: no cycle, no autocorrelation, no confounding, no order."""
    kinds = {w["kind"] for w in standing(host_effect, above_note=True)}
    assert not kinds & {"clock", "serial", "confound", "order"}


def test_no_cycle_and_no_random_order_of_benchmarks_are_found_in_the_audit(host_effect):
    """The full audit finds no daily cycle, and the benchmarks' order and hosts in order."""
    for check in ("daily_cycle", "level_order", "cramers_v"):
        assert {one["verdict"] for one in findings(host_effect, check=check)} == {"no evidence"}


def test_hosts_differ_in_the_audit_and_the_step_is_named(host_effect):
    """Between hosts there is dependence, and the largest change is that of the host that stepped."""
    (between,) = findings(host_effect, response="value", check="one_way")
    assert between["verdict"] == "dependence"
    (change,) = findings(host_effect, response="value", check="selected_shift", along="host")
    assert "eastus-B8ms-long-1" in change["effect"]["name"]
    assert change["effect"]["high"] < 0


def test_one_benchmark_is_usable_and_the_other_is_worth_three_runs(host_effect):
    """Syscall is worth about 3 runs (within a factor of 2); Memcpy, with an ICC of 0.033, far more."""
    assert 1.5 <= worth(host_effect, "value", benchmark="Syscall_Basic") <= 6
    assert worth(host_effect, "value", benchmark="Memcpy_1MB") > 20


def test_the_usable_benchmark_is_not_warned_of(host_effect):
    """What stands above `note` is of the other benchmark's runs."""
    for one in standing(host_effect, above_note=True):
        assert "Memcpy" not in one["message"]
        if one["response"] == "value":
            assert "Syscall_Basic" in one["message"]


# azure_daily_cycle: serial dependence, a cycle on one host, a change within a gap of 82 days on another.


def test_the_date_of_the_change_in_the_gap_is_unknown(daily_cycle):
    """Host 1 changed between 17 September and 8 December 2023, when nothing ran there."""
    (change,) = findings(daily_cycle, response="value", check="selected_shift", along="host")
    assert "eastus-D8s_v5-long-1" in change["effect"]["name"]
    assert 0.08 <= change["effect"]["value"] <= 0.1
    of_host = [
        one
        for one in standing(daily_cycle, above_note=True)
        if (one["response"], one["level"]) == ("value", "eastus-D8s_v5-long-1")
    ]
    assert of_host
    assert "unknown between" in of_host[0]["message"]
    assert "17 Sep" in of_host[0]["message"]
    assert "8 Dec" in of_host[0]["message"]


def test_the_cycle_is_said_of_one_host_only(daily_cycle):
    """The audit names the host with the cycle, about 1.5 %; no warning says it of all hosts."""
    (within,) = findings(daily_cycle, response="value", check="daily_cycle", along="host")
    assert within["verdict"] == "dependence"
    assert within["effect"]["name"].endswith("eastus-D8s_v5-long-2")
    assert 0.004 <= within["effect"]["value"] <= 0.03
    assert not [w for w in standing(daily_cycle) if w["kind"] == "clock" and w["along"] == "order"]


def test_serial_dependence_is_found_and_weighed(daily_cycle, tmp_path_factory, shared_folder):
    """Lag-1 within hosts is 0.54–0.62 and more; within hosts about 54 of 10,401 runs are left."""
    (within,) = findings(daily_cycle, response="value", check="von_neumann_rank", along="host")
    assert within["verdict"] == "dependence"
    assert within["effect"]["value"] > 0.5
    alone = told(tmp_path_factory.mktemp("alone"), shared_folder, "azure_daily_cycle", WITHIN_HOSTS)
    found = alone["evidence"]["responses"]["value"]
    low, high = (found["n"] * (1 - found[bound]) for bound in ("loss_high", "loss_low"))
    assert 27 <= found["n_effective"] <= 108 or low <= 54 <= high


# azure_independent: 11,869 machines, one run each, and nothing of practical size.


def test_independent_runs_raise_nothing_above_a_note(independent):
    """No warning above `note`, and no repeat: 440 distinct values are a grid, not duplicates."""
    assert standing(independent, above_note=True) == []
    assert not [w for w in independent["warnings"]["warnings"] if w["kind"] == "repeat"]


def test_independent_runs_keep_their_worth(independent):
    """Nearly all runs count: 11,630 of 11,869 by the source's measure."""
    found = independent["evidence"]["responses"]["value"]
    low, high = (found["n"] * (1 - found[bound]) for bound in ("loss_high", "loss_low"))
    assert low <= 11_630 <= high or 0.5 <= found["n_effective"] / 11_630 <= 2


def test_a_host_effect_with_one_run_a_host_is_not_passed_as_clean(independent):
    """Between hosts nothing can be told, and audit and evidence say so."""
    for one in findings(independent, check="one_way"):
        assert one["verdict"] == "not testable"
        assert "one run a level" in one["reason"]
        assert one["pvalue"] is None
    assert "one run a level" in json.dumps(independent["evidence"])


def test_what_is_certain_and_tiny_is_said_to_be_tiny(independent):
    """At 11,869 runs small dependence is certain; every such finding of `value` says that it is tiny."""
    for one in findings(independent, response="value", verdict="dependence"):
        assert "tiny" in one["reason"]


# ec2_vm_iterations: the machine is the unit, there is no clock and no order.


def test_nothing_is_said_of_time_where_there_is_no_clock(iterations):
    """No drift, no serial dependence, no cycle, no order of levels: nothing says in which order runs came."""
    for one in standing(iterations):
        assert one["kind"] not in {"drift", "serial", "clock", "order"}
        assert not [other for other in one["with"] if other["kind"] in {"drift", "serial", "clock", "order"}]
    for check in (
        "von_neumann_rank",
        "ljung_box",
        "mann_kendall",
        "pettitt",
        "selected_shift",
        "level_order",
    ):
        assert {one["verdict"] for one in findings(iterations, check=check)} <= {"not testable"}


@pytest.mark.parametrize(
    ("response", "low", "high"),
    [("md", -0.02, 0.4), ("sysbench", 0.58, 0.88), ("fio", 0.59, 0.95), ("wordpress", 0.58, 0.84)],
)
def test_the_machine_is_the_unit(iterations, response, low, high):
    """The intraclass correlation by host lies where the source's five large groups have it."""
    (found,) = findings(iterations, response=response, check="one_way", along="host")
    assert low <= found["effect"]["value"] <= high


def test_a_position_effect_is_found_where_there_is_one(iterations):
    """WordPress iterations differ; no other response's do."""
    verdicts = {
        one["response"]: one["verdict"] for one in findings(iterations, check="one_way", along="iteration")
    }
    assert verdicts.pop("wordpress") == "dependence"
    assert set(verdicts.values()) == {"no evidence"}


@pytest.mark.parametrize(("response", "n_effective"), [("fio", 60), ("md", 174)])
def test_runs_of_the_large_source_are_worth_what_the_source_says(iterations, response, n_effective):
    """Of 174 runs on the largest source, fio's are worth 60 and MD's 174, within a factor of 2."""
    assert n_effective / 2 <= worth(iterations, response, source=LARGEST) <= n_effective * 2


def test_runs_of_one_machine_are_not_counted_apart_for_wordpress(iterations):
    """With an ICC of 0.58 to 0.84 and 3 runs a machine, 174 runs are worth 65 to 80 at most, twice for slack.

    The source gives no number: the position effect of the iterations may take more.
    """
    assert worth(iterations, "wordpress", source=LARGEST) <= 150


def test_every_campaign_answers_in_numbers(host_effect, daily_cycle, independent, iterations):
    """No answer is without a number or a reason: the rest is not testable."""
    for documents in (host_effect, daily_cycle, independent, iterations):
        for one in documents["audit"]["findings"] + documents["audit"]["shape"]:
            assert (one["pvalue"] is None) == (one["verdict"] == "not testable")
            assert one["pvalue"] is not None or one["reason"]
            assert one["null"]
            assert one["assumes"]
            assert one["source"]
