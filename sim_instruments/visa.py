"""In-process VISA: pyvisa talks to the simulated instruments without a network.

It derives from pyvisa's VisaLibraryBase. pyvisa-sim's library was considered: opening, reading, writing, status byte,
clear, events and attributes would all have had to be replaced (its read loop is quadratic in a block's length and polls
real time, it opens resources that do not exist, and it hides AttributeErrors), after which only its registry of handles
was left.

Time-outs are virtual: an instrument that does not answer costs virtual time and no real time.
"""

from __future__ import annotations

import itertools
from collections import deque
from collections.abc import Iterable
from typing import Any

from pyvisa import attributes, constants, errors, highlevel, rname
from pyvisa.constants import EventMechanism, EventType, InterfaceType, ResourceAttribute, StatusCode
from pyvisa.util import LibraryPath

from .conversation import FOREVER_NS, Conversation, LinkLostError, ReadEnd
from .rack import Rack

_ENDS = {
    ReadEnd.END: StatusCode.success,
    ReadEnd.TERMINATION: StatusCode.success_termination_character_read,
    ReadEnd.COUNT: StatusCode.success_max_count_read,
    ReadEnd.TIMEOUT: StatusCode.error_timeout,
}
_DEFAULT_TIMEOUT_MS = 2000
_paths = itertools.count(1)


class _Session:
    """One open resource: its conversation and its attributes."""

    def __init__(self, rack: Rack, name: str, resource: str) -> None:
        self.parsed = rname.parse_resource_name(resource)
        self.kind = (self.parsed.interface_type_const, self.parsed.resource_class)
        self.is_stream = self.kind[1] == "SOCKET" or self.kind[0] == InterfaceType.asrl
        self.conversation = Conversation(rack, name, message_based=not self.is_stream)
        self.known = {
            attribute.attribute_id
            for attribute in attributes.AttributesPerResource[self.kind]
            | attributes.AttributesPerResource[attributes.AllSessionTypes]
        }
        self.values: dict[int, Any] = self._first_values(resource)
        self.events: deque[EventType] = deque()
        self.listening = False
        self.refresh()

    def _first_values(self, resource: str) -> dict[int, Any]:
        board = str(getattr(self.parsed, "board", 0))  # a serial line's may be a path
        return {
            ResourceAttribute.interface_type: self.kind[0],
            ResourceAttribute.interface_number: int(board) if board.isdecimal() else 0,
            ResourceAttribute.resource_class: self.kind[1],
            ResourceAttribute.resource_name: resource,
            ResourceAttribute.resource_manufacturer_name: "simulated bench",
            ResourceAttribute.timeout_value: _DEFAULT_TIMEOUT_MS,
            ResourceAttribute.suppress_end_enabled: self.kind[1] == "SOCKET",
        }

    def refresh(self) -> None:
        """Work out what reading and writing need of the attributes."""
        timeout_ms = int(self.value(ResourceAttribute.timeout_value))
        self.timeout_ns = None if timeout_ms == constants.VI_TMO_INFINITE else timeout_ms * 1_000_000
        termination = bytes([int(self.value(ResourceAttribute.termchar))])
        enabled = bool(self.value(ResourceAttribute.termchar_enabled))
        if self.kind[0] == InterfaceType.asrl:
            end_in = self.values.get(ResourceAttribute.asrl_end_in, constants.SerialTermination.termination_char)
            enabled = enabled or end_in == constants.SerialTermination.termination_char
        self.termination = termination if enabled else None
        self.ignore_end = bool(self.value(ResourceAttribute.suppress_end_enabled))
        self.send_end = bool(self.value(ResourceAttribute.send_end_enabled))

    def value(self, attribute: int) -> Any:
        """Return an attribute's value, or its default."""
        if attribute in self.values:
            return self.values[attribute]
        return attributes.AttributesByID[attribute].default


class SimulatedVisaLibrary(highlevel.VisaLibraryBase):
    """The VISA of one simulated bench. Build it with library(rack); each has a path of its own."""

    _rack: Rack

    def _init(self) -> None:
        self._handles = itertools.count(1)
        self._sessions: dict[int, _Session] = {}
        self._managers: set[int] = set()

    def attach(self, rack: Rack) -> None:
        """Say which bench it reaches. Raises ValueError where two instruments have one address."""
        self._rack = rack
        self._resources: dict[str, str] = {}
        for name, address in rack.addresses.items():
            canonical = _canonical(address)
            if canonical in self._resources:
                raise ValueError(f"{name} and {self._resources[canonical]} have one address: {address}")
            self._resources[canonical] = name

    @staticmethod
    def get_library_paths() -> Iterable[LibraryPath]:
        """No library of this kind lies anywhere."""
        return ()

    @staticmethod
    def get_debug_info() -> dict[str, str]:
        """Return what pyvisa-info prints."""
        return {"Simulated bench": "in this process"}

    # ---- handles ----------------------------------------------------------------------------------------------

    def open_default_resource_manager(self) -> tuple[Any, StatusCode]:
        """Return a handle for the resource manager."""
        handle = next(self._handles)
        self._managers.add(handle)
        return handle, self.handle_return_value(None, StatusCode.success)

    def list_resources(self, session: Any, query: str = "?*::INSTR") -> tuple[str, ...]:  # noqa: ARG002
        """Return the addresses of the wiring that match."""
        return tuple(rname.filter(list(self._resources), query))

    def open(
        self,
        session: Any,  # noqa: ARG002
        resource_name: str,
        access_mode: Any = constants.AccessModes.no_lock,  # noqa: ARG002
        open_timeout: Any = constants.VI_TMO_IMMEDIATE,  # noqa: ARG002
    ) -> tuple[Any, StatusCode]:
        """Open a resource of the wiring. Raises VisaIOError VI_ERROR_INV_RSRC_NAME or VI_ERROR_RSRC_NFND."""
        try:
            canonical = _canonical(resource_name)
        except rname.InvalidResourceName:
            raise errors.VisaIOError(StatusCode.error_invalid_resource_name) from None
        name = self._resources.get(canonical)
        if name is None or self._rack.faults.refuses_open(name):
            raise errors.VisaIOError(StatusCode.error_resource_not_found)
        handle = next(self._handles)
        self._sessions[handle] = _Session(self._rack, name, canonical)
        return handle, self.handle_return_value(None, StatusCode.success)

    def close(self, session: Any) -> StatusCode:
        """Close a resource, an event context or a manager with all that it opened."""
        if session in self._managers:
            self._managers.discard(session)
            self._sessions.clear()
        else:
            self._sessions.pop(session, None)
        return StatusCode.success

    def _session(self, handle: Any) -> _Session:
        try:
            return self._sessions[handle]
        except KeyError:
            raise errors.VisaIOError(StatusCode.error_invalid_object) from None

    def _done(self, handle: Any, status: StatusCode) -> StatusCode:
        """Note the status as pyvisa wants it; raises VisaIOError for an error."""
        self._last_status = self._last_status_in_session[handle] = status
        if status < 0:
            raise errors.VisaIOError(status)
        return status

    # ---- messages ---------------------------------------------------------------------------------------------

    def write(self, session: Any, data: bytes) -> tuple[int, StatusCode]:
        """Send bytes, with END at the last where VI_ATTR_SEND_END_EN says so. Raises VisaIOError VI_ERROR_CONN_LOST."""
        opened = self._session(session)
        try:
            opened.conversation.write(bytes(data), end=opened.send_end)
        except LinkLostError:
            self._done(session, StatusCode.error_connection_lost)
        return len(data), self._done(session, StatusCode.success)

    def read(self, session: Any, count: int) -> tuple[bytes, StatusCode]:
        """Return at most `count` bytes.

        Raises VisaIOError: VI_ERROR_TMO after the time-out, in virtual time; VI_ERROR_CONN_LOST.
        """
        opened = self._session(session)
        try:
            data, end = opened.conversation.read(
                count, termination=opened.termination, ignore_end=opened.ignore_end, timeout_ns=opened.timeout_ns
            )
        except LinkLostError:
            return b"", self._done(session, StatusCode.error_connection_lost)
        return data, self._done(session, _ENDS[end])

    def read_stb(self, session: Any) -> tuple[int, StatusCode]:
        """Serial poll. Raises VisaIOError where the resource has none (sockets, serial lines)."""
        opened = self._session(session)
        if opened.is_stream:
            self._done(session, StatusCode.error_nonsupported_operation)
        try:
            return opened.conversation.status_byte(), self._done(session, StatusCode.success)
        except LinkLostError:
            return 0, self._done(session, StatusCode.error_connection_lost)

    def clear(self, session: Any) -> StatusCode:
        """Device clear."""
        try:
            self._session(session).conversation.clear()
        except LinkLostError:
            self._done(session, StatusCode.error_connection_lost)
        return self._done(session, StatusCode.success)

    def flush(self, session: Any, mask: Any) -> StatusCode:
        """Discard what was not read, where the mask says so; nothing waits to be written."""
        if mask & (constants.BufferOperation.discard_read_buffer | constants.BufferOperation.discard_receive_buffer):
            self._session(session).conversation.take()
        return self._done(session, StatusCode.success)

    # ---- attributes -------------------------------------------------------------------------------------------

    def get_attribute(self, session: Any, attribute: Any) -> tuple[Any, StatusCode]:
        """Return an attribute that this kind of resource has. Raises VisaIOError VI_ERROR_NSUP_ATTR."""
        if session in self._managers:
            return self._manager_attribute(session, attribute)
        opened = self._session(session)
        if attribute not in opened.known:
            self._done(session, StatusCode.error_nonsupported_attribute)
        return opened.value(attribute), self._done(session, StatusCode.success)

    def _manager_attribute(self, session: Any, attribute: Any) -> tuple[Any, StatusCode]:
        if attribute != ResourceAttribute.resource_manufacturer_name:
            self._done(session, StatusCode.error_nonsupported_attribute)
        return "simulated bench", self._done(session, StatusCode.success)

    def set_attribute(self, session: Any, attribute: Any, attribute_state: Any) -> StatusCode:
        """Set an attribute. Raises VisaIOError VI_ERROR_NSUP_ATTR or VI_ERROR_ATTR_READONLY."""
        opened = self._session(session)
        if attribute not in opened.known:
            self._done(session, StatusCode.error_nonsupported_attribute)
        if not attributes.AttributesByID[attribute].write:
            self._done(session, StatusCode.error_attribute_read_only)
        opened.values[attribute] = attribute_state
        opened.refresh()
        return self._done(session, StatusCode.success)

    # ---- service requests -------------------------------------------------------------------------------------

    def enable_event(self, session: Any, event_type: Any, mechanism: Any, context: None = None) -> StatusCode:  # noqa: ARG002
        """Queue service requests. Raises VisaIOError for another event or mechanism."""
        opened = self._session(session)
        if event_type != EventType.service_request or opened.is_stream:
            self._done(session, StatusCode.error_invalid_event)
        if mechanism != EventMechanism.queue:
            self._done(session, StatusCode.error_nonsupported_mechanism)
        opened.listening = True
        return self._done(session, StatusCode.success)

    def disable_event(self, session: Any, event_type: Any, mechanism: Any) -> StatusCode:  # noqa: ARG002
        """Queue no more events."""
        self._session(session).listening = False
        return self._done(session, StatusCode.success)

    def discard_events(self, session: Any, event_type: Any, mechanism: Any) -> StatusCode:  # noqa: ARG002
        """Forget queued events; pyvisa calls this as it closes."""
        return self._done(session, StatusCode.success)

    def wait_on_event(self, session: Any, in_event_type: Any, timeout: int) -> tuple[Any, Any, StatusCode]:
        """Wait in virtual time for a service request. Raises VisaIOError VI_ERROR_TMO or VI_ERROR_NENABLED."""
        opened = self._session(session)
        if not opened.listening:
            self._done(session, StatusCode.error_not_enabled)
        timeout_ns = FOREVER_NS if timeout == constants.VI_TMO_INFINITE else int(timeout) * 1_000_000
        if not opened.conversation.await_service(timeout_ns):
            self._done(session, StatusCode.error_timeout)
        return in_event_type, next(self._handles), self._done(session, StatusCode.success)


def _canonical(resource_name: str) -> str:
    return str(rname.ResourceName.from_string(resource_name))


def library(rack: Rack) -> SimulatedVisaLibrary:
    """Return a VISA library for this bench alone, to be handed to pyvisa.ResourceManager."""
    made = SimulatedVisaLibrary(f"simulated-bench-{next(_paths)}")
    assert isinstance(made, SimulatedVisaLibrary)
    made.attach(rack)
    return made
