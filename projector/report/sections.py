"""The sections of the report in their order: number, name, the reader's question, and what each must hold."""

from __future__ import annotations

from dataclasses import dataclass, field

from projector.report.parts import told


@dataclass(frozen=True)
class Heading:
    """One section's opening."""

    number: str = field(metadata=told("section number, or A"))
    name: str = field(metadata=told("section name"))
    question: str = field(metadata=told("the question the section answers, as its reader asks it"))

    @property
    def id(self) -> str:
        """The anchor of the section."""
        return f"s{self.number}"


HEADINGS = (
    Heading("1", "Results at a glance", "Was the criterion met, by how much, what would break it?"),
    Heading("2", "How to read this report", "How do I cite, follow and trust a number?"),
    Heading("3", "Scope and control totals", "Is everything in, and does it tie?"),
    Heading("4", "Assets", "What backs the reserves, and who can take it away early?"),
    Heading("5", "Liabilities", "What is promised, and when is it paid?"),
    Heading("6", "Scenarios", "What futures were tried?"),
    Heading("7", "Method", "How is each number made?"),
    Heading("8", "Assumptions", "What was assumed, with what margin?"),
    Heading("9", "Results by scenario", "What happened year by year?"),
    Heading("10", "The call function", "Who was called, when, why, at what cost?"),
    Heading("11", "Sensitivities", "Which assumption matters most?"),
    Heading("12", "Stochastic results", "How often and how badly on random paths?"),
    Heading("13", "What would have to happen", "What change would make the criterion no longer hold?"),
    Heading("14", "Change since last year", "What moved?"),
    Heading("15", "Checks made", "Were the sums checked?"),
    Heading("16", "How to reproduce", "Can I get the same bytes?"),
    Heading("17", "Cautions and reliances", "What must I not conclude?"),
    Heading("18", "Glossary", "What does the word mean here?"),
    Heading("A", "Appendix tables", "Show me all of it."),
)


@dataclass(frozen=True)
class Placed:
    """A memorandum item and the section that holds it."""

    item: str = field(metadata=told("what a memorandum must hold, in the words of its usual list"))
    section: str = field(metadata=told("section number, empty when the memorandum itself must hold it"))


OUTSIDE = ""  # the streams are supplied: the memorandum itself must hold it

REQUIREMENTS = (
    Placed("Reserves: product descriptions and guarantees", OUTSIDE),
    Placed("Reserves: source of liability in force, reserve method and basis", OUTSIDE),
    Placed("Reserves: reinsurance arrangements", "17"),
    Placed("Reserves: assumptions on policyholders, expenses and crediting", OUTSIDE),
    Placed("Assets: portfolio description, quality, distribution and types", "4"),
    Placed("Assets: investment and disinvestment assumptions", "8"),
    Placed("Assets: source of asset data", "17"),
    Placed("Assets: valuation bases", "7"),
    Placed("Assets: default costs", "4"),
    Placed("Assets: bond call function", "10"),
    Placed("Assets: market value of assets sold and yield of assets bought", "7"),
    Placed("Analysis: methodology", "7"),
    Placed("Analysis: blocks in and out, degree of rigor, materiality", "3"),
    Placed("Analysis: the criterion and its basis", "1"),
    Placed("Analysis: federal income tax and treatment of reinsurance", "17"),
    Placed("Material changes since the prior year", "14"),
    Placed("Summary of results", "9"),
    Placed("Issues summary: scenarios tested", "6"),
    Placed("Issues summary: sensitivities", "11"),
    Placed("Issues summary: negative ending surplus and additional reserve", "9"),
    Placed("Issues summary: how ending surplus is set", "7"),
    Placed("Issues summary: interim results", "9"),
    Placed("Issues summary: options embedded in assets", "10"),
    Placed("Reliances, data review, limitations", "17"),
    Placed("Reproduction and retention", "16"),
)
