"""The base of every error of this package; each error itself stands beside the code that raises it.

The tree, for whoever must know what to catch::

    WatcherError
    ├── ServiceSettingsBroken   service_settings   a plain setting has the wrong form
    ├── LedgerUnusable          database           the ledger cannot be trusted, the service does not start
    ├── TargetTaken             queueing           two exports claim one result file
    ├── TargetOutside           delivery           a result file would leave the results folder
    ├── StagedFileAltered       delivery           a result file changed between evaluation and delivery
    ├── CopyRefused             copies             this content is never taken in (too large, no regular file)
    ├── CopyPostponed           copies             not now: still written, held open, disk nearly full
    ├── WorkerFailed            worker             base of what costs an export an attempt
    │   ├── WorkerDied
    │   └── WorkerLate
    ├── WorkerUnfit             worker             no worker can be started: the fault of no export
    ├── WorkerStopped           worker             the service itself is stopping: costs nothing
    ├── ReplyBroken             replies            the worker's answer has the wrong form
    ├── PasswordUnreadable      password           no password to sign in to the mail server with
    ├── RequestRefused          requests           what a person asked for cannot be done
    ├── RecordsOnNetwork        places             the records would lie on another computer
    ├── InstanceHeld            instance           another service holds the records folder
    ├── PublishedUnusable       verification       the published examples that ship with the program are damaged
    └── ServiceUnready          service            nothing was adopted yet

Nothing here formats or logs.
"""

from __future__ import annotations


class WatcherError(Exception):
    """Any foreseen failure of the watcher; its text says what, what follows, and what to do."""
