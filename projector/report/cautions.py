"""Section 17 in data: the twenty cautions, each naming who must act. Figures come from the study, by key."""

from __future__ import annotations

from dataclasses import dataclass, field

from projector.report.parts import told
from projector.study.records import Study


@dataclass(frozen=True)
class Caution:
    """One numbered caution; `said` holds the study's own words where it has any."""

    number: str = field(metadata=told("1 to 20"))
    name: str = field(metadata=told("subject"))
    text: str = field(metadata=told("the caution"))
    said: str = field(metadata=told("the study's own words, printed as such"))


def cautions(study: Study, valued_on: str, informed_on: str, defects: str, segment_table: str) -> tuple[Caution, ...]:
    """All twenty, in a fixed order; what the study does not state is said to be missing."""
    texts = study.texts
    items = (
        ("Purpose", "This report supports the year-end test of the named company for its appointed actuary, peer "
                    "reviewer and regulator. Do not use it for pricing, trading or any other purpose.", ""),
        ("Dates", f"Values are as of {valued_on}; facts are taken into account up to {informed_on}. The actuary must "
                  "add what became known later.", ""),
        ("Projections", "A projection shows what follows from its assumptions. What happens will differ, and the "
                        "difference can be large.", ""),
        ("Reliance on others", "Asset lists, call terms, prices and liability flows come from others (table 17.1). "
                               "The program checked their form, their totals and their ranges, not their truth; the "
                               "actuary must confirm them.", ""),
        ("Data", f"{defects} Treatments are listed in table 3.3; the actuary must judge whether they are fit for "
                 "use.", ""),
        ("Limits of the model", "One rate factor, spreads that do not move with rates, whole-issue calls and flows "
                                "at month ends (section 7, with directions). Issuers are given no sight of the "
                                "path.", ""),
        ("Scenarios", "The scenarios are not equally likely, are no distribution, and none is a best estimate. Do "
                      "not count them as odds.", ""),
        ("Criterion", "What counts as met is the judgment of the named actuary, fixed by the study before the "
                      "results. Another reader may choose another criterion.", ""),
        ("Scope in time", "The test is at the valuation date for business in force. No new business enters.", ""),
        ("Materiality", "Read differences against the materiality level of the study.",
         texts.materiality or "not stated by the study"),
        ("Law and manual", "Local law and the manual in force rule wherever they differ from this report; the "
                           "actuary must confirm edition, state variations and "
                           "dates.", texts.law_and_manual or "not stated by the study"),
        ("Whose assumptions", "Table 8.1 shows which choices the study states and which are numerical defaults of "
                              "the program. No actuarial assumption has a default.", ""),
        ("Prior year", "Differences from last year are not calculated by this version (section 14); the actuary must "
                       "explain them.", ""),
        ("Reinsurance", "Liability flows are taken as supplied. If they are net of reinsurance, collectability is "
                        "assumed; the actuary must say so.", ""),
        ("Tax", "Tax is not modelled: all results are before tax. The actuary must judge the effect of tax law as "
                "enacted.", ""),
        ("Aggregation", "Results of all segments together can hide a segment below zero. Table "
                        f"{segment_table} lists every segment by scenario; offsets between segments need their own "
                        "ground.", ""),
        ("Responsibility", "The responsible actuary is named by the study. The program gives numbers, never an "
                           "opinion; the wording, the category and the signature of the opinion are the "
                           "actuary's.", study.responsible_actuary),
        ("Confidentiality", "A memorandum and its exhibits may be protected under the standard valuation law as "
                            "adopted. Mark and keep this report accordingly.", ""),
        ("Rounding, unit, sign", "Section 2 states the unit, the rounding and the sign. Add full values from the "
                                 "workbook, not printed figures.", ""),
        ("Identity of the run", "Input digest, digest of the rate paths and digests of results are in section 16. A "
                                "report that cannot be reproduced from its inputs must not be relied on.", ""),
    )  # fmt: skip
    return tuple(Caution(str(k), name, text, said) for k, (name, text, said) in enumerate(items, start=1))
