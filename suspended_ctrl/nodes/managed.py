"""What the nodes have in common: lifecycle, parameters, channels, loop, diagnostics."""

from collections.abc import Callable
import gc
import time
import traceback

from rclpy.lifecycle import LifecycleNode, LifecycleState, TransitionCallbackReturn

from suspended_ctrl.nodes.channels import Inbox, Outbox
from suspended_ctrl.nodes.health import Health
from suspended_ctrl.nodes.parameters import declare, NodeParameters
from suspended_ctrl.nodes.spin import Loop
from suspended_ctrl.nodes.topics import latched
from suspended_ctrl.nodes.wire import ReadValue
from suspended_ctrl.review.topics import JointNames
from suspended_ctrl.rig.errors import InputError
from suspended_ctrl.rig.file import load_rig
from suspended_ctrl.rig.rig import Rig

_REPORT_EVERY_S = 1.0
# A turn makes hundreds of objects and hardly a cycle.
_COLLECT = (20_000, 20, 20)


class ManagedNode(LifecycleNode):
    """
    A lifecycle node round one part.

    A subclass says in ``build`` what it needs and in ``turn`` what it does. rclpy drops exceptions
    of lifecycle callbacks: here they are logged and the transition fails.

    Parameters
    ----------
    name : str
    model : subclass of NodeParameters

    Raises
    ------
    InputError
        For parameters that are not allowed.

    """

    def __init__(self, name: str, model: type[NodeParameters]) -> None:
        super().__init__(name, automatically_declare_parameters_from_overrides=True)
        self.parameters = declare(self, model)
        self.leaving = False
        self.active = False
        self.fault = ''
        self.rig: Rig
        self._names = JointNames((), ())
        self._inboxes: list[Inbox] = []
        self._outboxes: list[Outbox] = []
        self.health = Health(self.get_fully_qualified_name())
        self.loop = Loop(self, self._turn, self._serve)
        self.diagnostics = Outbox(self, '/diagnostics', self._names, always=True)
        # The first message of a kind has its layout looked up, which takes tenths of a second:
        # not while the rig hangs on this node's ticks.
        self._report()
        self._report_s = time.monotonic() + _REPORT_EVERY_S

    # ------------------------------------------------------------ for subclasses

    def build(self) -> None:
        """Make the part and its channels from ``self.rig`` and ``self.parameters``."""
        raise NotImplementedError

    def turn(self, t: float, due: bool) -> None:
        """
        Step if there is a reason to.

        Parameters
        ----------
        t : float
            Host time now, s.
        due : bool
            Whether the timer, where there is one, says so.

        """
        raise NotImplementedError

    def idle(self, t: float, due: bool) -> None:
        """Do what is to be done while inactive; nothing unless overridden."""

    def start(self) -> None:
        """Forget what is stale; called on activation."""

    def notes(self) -> dict[str, float]:
        """Figures for the diagnostics, once a second."""
        return {}

    def clean(self) -> None:
        """Give back what ``build`` took, channels aside; also after half a ``build``."""

    def leave(self) -> None:
        """Say last words; called once when the process is told to end."""

    # ------------------------------------------------------------ tools for them

    def inbox(self, topic: str, read: ReadValue | None = None) -> Inbox:
        """Listen to a topic, see ``Inbox``."""
        made = Inbox(self, topic, self._names, read)
        self._inboxes.append(made)
        return made

    def outbox(self, topic: str, always: bool = False) -> Outbox:
        """Publish on a topic; mute while inactive unless ``always``."""
        made = Outbox(self, topic, self._names, always)
        self._outboxes.append(made)
        return made

    def now_s(self) -> float:
        """Host time, s; 0 under use_sim_time before the first clock message."""
        clock = self.get_clock()
        if clock.ros_time_is_active:
            return float(clock.now().nanoseconds * 1e-9)
        return time.time()

    # ------------------------------------------------------------ lifecycle

    def on_configure(self, state: LifecycleState) -> TransitionCallbackReturn:
        """Read the rig, make the part."""
        return self._guarded('configure', self._configure, super().on_configure, state)

    def on_activate(self, state: LifecycleState) -> TransitionCallbackReturn:
        """Begin to step."""
        return self._guarded('activate', self._activate, super().on_activate, state)

    def on_deactivate(self, state: LifecycleState) -> TransitionCallbackReturn:
        """Step no more."""
        self.active = False
        return self._guarded('deactivate', lambda: None, super().on_deactivate, state)

    def on_cleanup(self, state: LifecycleState) -> TransitionCallbackReturn:
        """Give back what configuring took."""
        return self._guarded('clean up', self._clean, super().on_cleanup, state)

    def on_shutdown(self, state: LifecycleState) -> TransitionCallbackReturn:
        """Step no more and leave."""
        self.active = False
        self.leaving = True
        return self._guarded('shut down', self._clean, super().on_shutdown, state)

    def _guarded(self, what: str, action: Callable[[], None],
                 then: Callable[[LifecycleState], TransitionCallbackReturn],
                 state: LifecycleState) -> TransitionCallbackReturn:
        try:
            action()
            self.fault = ''
            return then(state)
        except (InputError, LookupError, ValueError) as error:
            self.fault = str(error)
            self.get_logger().error(f'cannot {what}: {error}')
        except Exception as error:
            self.fault = f'{type(error).__name__}: {error}'
            self.get_logger().error(f'cannot {what}: {traceback.format_exc()}')
        return TransitionCallbackReturn.FAILURE

    def _configure(self) -> None:
        try:
            self.rig = load_rig(self.parameters.rig)
            self._names = JointNames(self.rig.rotors.names, self.rig.carrier.axes)
            self.build()
        except BaseException:
            self._clean()
            raise

    def _activate(self) -> None:
        for box in self._inboxes:
            # Latched topics say what holds; everything else that waited is old.
            if not latched(box.topic):
                box.discard()
        self.start()
        # What is there now stays: collections need not look at it again.
        gc.collect()
        gc.freeze()
        gc.set_threshold(*_COLLECT)
        self.active = True

    def _clean(self) -> None:
        self.loop.listen(())
        self.clean()
        for box in self._inboxes:
            self.destroy_subscription(box.subscription)
        for out in self._outboxes:
            if out.always:
                self.destroy_publisher(out.publisher)
            else:
                self.destroy_lifecycle_publisher(out.publisher)
        self._inboxes.clear()
        self._outboxes.clear()

    # ------------------------------------------------------------ turns

    def _turn(self, due: bool) -> None:
        t = self.now_s()
        if t == 0.0:
            return
        if self.active:
            self.turn(t, due)
            return
        self.idle(t, due)
        for box in self._inboxes:
            if not latched(box.topic):
                box.discard()

    def _serve(self) -> None:
        now = time.monotonic()
        if now < self._report_s:
            return
        self._report_s = max(self._report_s + _REPORT_EVERY_S, now)
        self._report()

    def _report(self) -> None:
        self.health.late = self.loop.late
        state = 'active' if self.active else 'inactive'
        self.diagnostics.send(
            self.health.report(self.now_s(), state, self._inboxes, self.fault,
                               self.notes() if self.active else {}))
