"""The settings that both jobs share."""

from ledgersolve.contract.columns import Entry, Holds, ListSheet
from ledgersolve.contract.reading import Job

SHEET = "Settings"
"""Name of the sheet; its two columns are Setting and Value, further columns are notes."""

JOB = Entry("Job", "Which job the workbook is for.", Holds.CHOICE, "site selection", required=True,
            choices=("site selection", "lot sizing"))
TITLE = Entry("Title", "Heading of the Decision page.", Holds.TEXT, "Depots for the north",
              default_words="file name")
CURRENCY = Entry("Currency", "The one currency of all money in the workbook (ISO 4217 code).", Holds.CURRENCY,
                 "EUR", required=True)
TIME_LIMIT = Entry("Time limit (seconds)", "How long solving may take; the best plan until then comes back.",
                   example=300, unit="seconds", default=300.0, low=1, high=86400)
ACCEPTED_GAP = Entry("Accepted gap (%)",
                     "Solving stops once no plan can be cheaper by more than this share of the cost.",
                     example=0.01, unit="%", default=0.01, low=0, high=100)
QUESTIONS = Entry("Questions", "yes: the returned workbook also answers why, why not and what if.",
                  Holds.YES_NO,
                  "yes", default=True)
QUESTIONS_SHARE = Entry("Share of time for questions (%)",
                        "Share of the time limit that is kept for these answers; solving has the rest.",
                        example=20, unit="%", default=20.0, low=0, high=100)
COMPARE = "Compare with today"

EXAMPLES: dict[tuple[Job, str], str] = {
    (Job.LOT_SIZING, TITLE.title): "Filling line, weeks 1 to 12",
    **{(job, JOB.title): job.value for job in Job},
}
"""Examples of common settings that differ between the jobs."""

FIRST = (JOB, TITLE, CURRENCY, TIME_LIMIT, ACCEPTED_GAP, QUESTIONS, QUESTIONS_SHARE)
"""Settings of both jobs, in the order of the contract."""

LIST = ListSheet(
    SHEET, "What to do and with which rules, one setting a row; further columns are notes.",
    (
        Entry("Setting", "Name of the setting.", Holds.TEXT, "Currency", required=True),
        Entry("Value", "Its value; an empty cell takes the default.", Holds.TEXT, "EUR", required=True),
    ),
    key=("Setting",), required=True,
)
"""The sheet itself."""
