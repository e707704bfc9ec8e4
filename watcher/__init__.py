"""Everything that touches the world: folders, the ledger, the worker process, result files, mail.

Start at `watcher.service`.
"""
