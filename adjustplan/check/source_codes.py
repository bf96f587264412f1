"""What the codes of opening data mean: files, workbooks, databases, servers, clusters."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

SOURCE_CODES: Mapping[str, str] = MappingProxyType(
    {
        "data-connection-lost": "The server, the cluster or one of its executors went away while it was counting."
        " Nothing was written and nothing is half done: run the same again once it is back.",
        "data-no-connection": "The server does not answer, or does not let this user in. Who you are is told by the"
        " environment or the password file, never by the plan. Check that, the address, and that the server runs.",
        "data-refused": "The server understood and would not do it, usually for want of the right to read the table.",
        "data-no-table": "A database or a workbook has no table of this name, or the plan names none. The message"
        " lists what there is; name one in [data].",
        "data-table-ambiguous": "Several tables have this name, in different schemas. Write the schema before it.",
        "data-table-unused": "The plan names a table, but data of this kind have none. Leave it out.",
        "data-parts-differ": "The files of one folder or pattern do not hold the same columns, or hold them in"
        " different types, so they are not parts of one table. Write them again, all in one way.",
        "data-extra-missing": "Reading this kind of data needs a package that is not installed; the message says"
        " which command installs it.",
        "data-no-room": "Memory, or the room for temporary files, was used up while the data were read. Free some,"
        " or set TMPDIR to a folder on a larger disk.",
        "data-value-labels": "The file has labels for the values of a column, so the labels are its levels here."
        " Name the labels, not the codes, in the plan.",
        "data-labels-partial": "The file has labels for some values of a column and not for all, so the column keeps"
        " its codes. Label every value, or say in the plan what the codes mean.",
        "data-missing-codes": "The file itself declares codes that stand for a missing value, and they became missing.",
        "data-spark-start": "Spark could not be started, usually for want of a Java runtime.",
        "data-spark-workers": "Spark's executors run another Python, or lack a package. Give them the same Python"
        " with the same packages as the machine that asks.",
    }
)
