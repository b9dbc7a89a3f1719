"""Where each number came from: the record of a node, the ledger of a study, and what has changed since."""
