"""The errors a person may read. Each is one plain sentence that says what is wrong and what to do."""


class PackfoldError(Exception):
    """Root of every error that is meant for a person; the command line prints it without a traceback."""

    exit_code = 1


class SettingsError(PackfoldError):
    """The settings file or an environment variable cannot be used as it stands."""

    exit_code = 2


class UsageError(PackfoldError):
    """The command was asked for something that does not exist or does not fit together."""

    exit_code = 2


class InventoryError(PackfoldError):
    """The inventory contradicts itself or what is already known."""


class PayloadError(PackfoldError):
    """A message or a log line cannot be read; the text is the reason kept beside the raw bytes."""


class StoreError(PackfoldError):
    """The database cannot be opened, is of another version, or refuses to take data."""


class BrokerError(PackfoldError):
    """The MQTT broker cannot be started or reached, or refuses the hub."""


class AlreadyRunningError(PackfoldError):
    """Another hub works on the same data folder."""
