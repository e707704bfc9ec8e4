"""Everything that touches the world: folders, the ledger, the worker process, result files, mail.

Start at `watcher.service`.
"""

#: Stands in every record and heartbeat; the package's version is read from here.
VERSION = "0.1.0"
