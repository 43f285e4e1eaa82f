"""What can be wrong with one of our SQLite files, one class per thing a person would do about it."""


class StorageError(Exception):
    """One of our files cannot be used; the message names the file, what was found and the fix."""


class StorageMissingError(StorageError):
    """There is no file at this path."""


class StorageForeignError(StorageError):
    """The file is sound but not ours; it was left untouched."""


class StorageVersionError(StorageError):
    """The file is ours, of another schema version; it was left untouched."""


class StorageDamagedError(StorageError):
    """The file is damaged; raised to readers only, a writer moves the file aside and starts a new one."""


class StorageUnwritableError(StorageError):
    """The file cannot be created or written: folder, rights, or a full disk."""


class StorageBusyError(StorageError):
    """Another process writes this file already."""
