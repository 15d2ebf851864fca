"""The groove of a ruling: where it runs, which section under which light explains it, where its centre is."""
