"""The executables and the models of their parameters."""

from suspended_ctrl.nodes.effort_allocator import EffortAllocatorParameters
from suspended_ctrl.nodes.mission_player import MissionPlayerParameters
from suspended_ctrl.nodes.parameters import NodeParameters
from suspended_ctrl.nodes.rig_bench import RigBenchParameters
from suspended_ctrl.nodes.safety_parameters import SafetySupervisorParameters
from suspended_ctrl.nodes.state_estimator import StateEstimatorParameters
from suspended_ctrl.nodes.wrench_controller import WrenchControllerParameters

MODELS: dict[str, type[NodeParameters]] = {
    'state_estimator': StateEstimatorParameters,
    'wrench_controller': WrenchControllerParameters,
    'effort_allocator': EffortAllocatorParameters,
    'safety_supervisor': SafetySupervisorParameters,
    'mission_player': MissionPlayerParameters,
    'rig_bench': RigBenchParameters,
}
