"""run(job) -> Study, the one door: place, loop, ledgers, ratings, order, words."""

from server.selection import cautions as safety
from server.selection import ratings
from server.selection.candidates import judged, ranked, resolution, under_double_rule
from server.selection.crossover import crossover
from server.selection.faults import fault_study, second_source
from server.selection.field_test import field_test
from server.selection.heating import hot_parts
from server.selection.job import Job
from server.selection.ledger import Periods
from server.selection.notes import notes_on
from server.selection.ranking import NONE_KEY, verdict
from server.selection.result import Assumption, Study
from server.selection.site import dark_shunts, site_assumptions, site_days, site_facts, string_spec, worst_case
from server.selection.solving import Table, day_trace, solve_all

ENGINE_VERSION = "0.1.0"


def run(job: Job) -> Study:
    """Judge every candidate of `job` and answer.

    Raises:  InputError where the job cannot be computed; a part that fails a check is a result, not an error.
    """
    site = site_days(job)
    string = string_spec(job)
    shunts = dark_shunts(job, string.spec)
    worst = worst_case(job, site)
    hot = hot_parts(job, worst, ratings.current_factor(job.rule))
    table = Table.of(job, hot)
    periods = Periods.of(site.days, site.stated)
    solved = solve_all(job, site, string.spec, shunts, table, periods)
    facts = site_facts(job, site, string, shunts, worst, periods, solved.deciding)
    candidates = judged(job, worst, hot, table, solved)
    resolution_wh = resolution(solved.ledgers[table.valve], facts)
    candidates = ranked(job, candidates, facts.deciding_period, resolution_wh)
    rule_winner = under_double_rule(job, worst, candidates, facts, resolution_wh)
    site_wide = ratings.site_checks(job)
    answer = verdict(job, facts, candidates, resolution_wh, rule_winner, site_wide)
    choice = next((item for item in candidates if item.key == answer.choice), None)
    none = next(item for item in candidates if item.key == NONE_KEY)
    assumptions = tuple(Assumption(*row) for row in job.assumptions) + site_assumptions(job, site)
    if choice is not None and choice.part is not None:
        assumptions += tuple(Assumption("part", choice.title, text) for text in choice.part.assumed)
    return Study(
        ENGINE_VERSION,
        answer,
        facts,
        tuple(candidates),
        site_wide,
        safety.cautions(safety.Situation(job, facts, choice, site_wide)),
        notes_on(job, site, string, choice, candidates),
        assumptions,
        solved.audit,
        fault_study(job, string.spec, shunts[1], worst.box_c, choice, none),
        None if answer.choice is None or choice is None else field_test(job, facts, choice, none),
        second_source(job, string.spec, shunts[1], facts, worst, choice),
        None if choice is None else crossover(job, string.spec, shunts[1], facts, choice, candidates),
        day_trace(site, periods, facts, table, solved, choice),
    )
