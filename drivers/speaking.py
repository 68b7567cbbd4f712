"""What the four drivers have in common: a dialect spoken over a link."""

from collections.abc import Mapping

from drivers.capabilities import Written
from drivers.dialect import Dialect
from drivers.errors import BadReply, Closed, LinkError, NotANumber, Timeout
from drivers.link import Link
from drivers.phrases import Setting
from drivers.wordings import Value

_COMPLAINTS_MAX = 32


class Lacking(LinkError):
    """The instrument's dialect has no word for what is wanted."""


class Speaker:
    """An instrument whose dialect is spoken over its link.

    Parameters
    ----------
    link : Link
        Owned from now on: closed by `close`.
    dialect : Dialect
    coil_constant_t_per_a : float, optional
        T/A, for supplies that speak of field as current.

    Raises
    ------
    DialectError
        The dialect needs a coil constant.
    """

    def __init__(
        self, link: Link, dialect: Dialect, coil_constant_t_per_a: float | None = None
    ) -> None:
        self.link, self.dialect = link, dialect
        self._look = dialect.look(coil_constant_t_per_a)
        self._exchanges = self._look.exchanges()
        self._settings = dialect.settings(coil_constant_t_per_a)

    async def identity(self) -> str:
        """Reply to the dialect's identity query."""
        return await self.link.query(self.dialect.content.identity.query)

    async def complaints(self) -> tuple[str, ...]:
        """What the instrument's error queue holds, oldest first; it is empty afterwards.

        Empty too if the dialect knows no error queue. For finding out why a value read back
        differs from the one that was written.
        """
        errors = self.dialect.content.errors
        found: list[str] = []
        while errors is not None and len(found) < _COMPLAINTS_MAX:
            # Not repeated: an entry whose reply was lost is gone from the queue.
            entry = await self.link.ask(errors.query, str, repeat=False)
            if entry.startswith(errors.none):
                break
            found.append(entry)
        return tuple(found)

    async def close(self) -> None:
        """Close the link; safe to call twice."""
        await self.link.close()

    # -- for the drivers ----------------------------------------------------------------------

    async def _read_values(self) -> Mapping[str, Value]:
        """One look at the instrument: every value of its kind."""
        values: dict[str, Value] = dict(self._look.always)
        for message, parse in self._exchanges:
            values.update(await self.link.ask(message, parse))
        return values

    async def _read_setting(self, name: str) -> Value:
        setting = self._setting(name)
        return await self.link.ask(setting.question.query, setting.parse)

    async def _write(self, name: str, value: Value) -> Written:
        """Write a setting once, and read it back.

        Raises
        ------
        ValueError
            The value cannot be sent; nothing was.
        LinkError
            The command may not have been carried out, or could not be read back.
        """
        setting = self._setting(name)
        try:
            command = setting.spelled(value)
        except ValueError as error:
            raise ValueError(f"{self.link.name}: {name}: {error}") from None
        query = setting.question.query
        if not setting.joins:
            await self.link.write(command)
            return Written(command, await self.link.ask(query, setting.parse))
        message = f"{command}{setting.joins}{query}"
        try:
            return Written(message, await self.link.ask(message, setting.parse, repeat=False))
        except (Timeout, Closed, BadReply) as error:
            if not error.sent or isinstance(error.__cause__, NotANumber):
                raise
        # The command may have arrived. It is not sent again: what the instrument says now counts.
        return Written(message, await self.link.ask(query, setting.parse))

    def _setting(self, name: str) -> Setting:
        if name not in self._settings:
            raise Lacking(
                self.link.name,
                self.link.address,
                problem=f"the dialect {self.dialect.name} has no setting {name!r}",
            )
        return self._settings[name]
