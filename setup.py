"""Installation of suspended_ctrl, for colcon and for pip."""

from pathlib import Path

from setuptools import find_packages, setup

NAME = 'suspended_ctrl'

NODES = (
    'effort_allocator',
    'mission_player',
    'rig_bench',
    'safety_supervisor',
    'state_estimator',
    'wrench_controller',
)

# Lower bounds keep an older library of the system from being picked up where an environment sees
# the system's (see `make setup` beside a sourced ROS).
RUN = (
    'numpy>=2.0',
    'scipy>=1.14',            # first built against numpy 2 and in use with Python 3.13
    'numba>=0.61',            # first for numpy 2.1 and Python 3.13
    'cvxpy>=1.9',             # the form in which compiled problems are taken apart
    'daqp>=0.8.1',            # wheels for Python 3.13
    'transforms3d>=0.4.2',    # first for numpy 2
    'pydantic>=2.7',
    'ruamel.yaml>=0.18',
    'mujoco~=3.17',           # 4.0.0 split the package and came with a fault in its factorisation
    'rosbags>=0.10.5',        # the rosbag2 writer with MCAP storage as a plain option
    'matplotlib>=3.9',        # first built against numpy 2
    'contourpy>=1.2.1',       # matplotlib's, first for numpy 2; matplotlib itself takes older ones
    'rich>=13',
)

# A ROS 2 Jazzy without a ROS installation, as wheels. Leave out where ROS is sourced.
ROS = (
    'ros-jazzy-rclpy[fastrtps]',
    'ros-jazzy-diagnostic-msgs',
    'ros-jazzy-geometry-msgs',
    'ros-jazzy-lifecycle-msgs',
    'ros-jazzy-nav-msgs',
    'ros-jazzy-rcl-interfaces',
    'ros-jazzy-sensor-msgs',
    'ros-jazzy-std-msgs',
    'ros-jazzy-std-srvs',
    'ros-jazzy-trajectory-msgs',
)

# Jazzy's linters as wheels, for the same machines; beside a sourced ROS they are packages of it.
AMENT = (
    'ros-ament-flake8~=0.17.3',
    'ros-ament-pep257~=0.17.3',
)

TEST = (
    'pytest>=8',
    'pytest-timeout>=2.3',
    'hypothesis>=6.100',
    # Independent answers to compare with.
    'pin>=3.3',
    'control>=0.10.1',        # first for numpy 2
    'filterpy>=1.4.5',
    'clarabel>=0.9',
    'osqp>=1.0',
    'mcap-ros2-support>=0.5.5',
    # Checks of the source.
    'catkin-pkg>=1.0',
    'flake8>=7',
    'flake8-builtins>=2.1,<2.3',  # as beside Jazzy; later ones have rules of their own
    'flake8-comprehensions>=3.14',
    'flake8-docstrings>=1.7',
    'flake8-import-order>=0.18.2',
    'flake8-quotes>=3.4',
    'import-linter>=2.14',
    'mypy>=1.13',
    'pydocstyle>=6.3',
    'ruff>=0.9',
)


def shared(folder: str) -> list[tuple[str, list[str]]]:
    """List the files under ``folder`` as data files of the package's share."""
    found: dict[str, list[str]] = {}
    for path in sorted(Path(folder).rglob('*')):
        if path.is_file():
            found.setdefault(f'share/{NAME}/{path.parent}', []).append(str(path))
    return list(found.items())


setup(
    name=NAME,
    version='0.1.0',
    description='Control of rotor-driven platforms that hang on an elastic tether',
    author='The suspended_ctrl maintainers',
    author_email='maintainers@suspended-ctrl.example',
    maintainer='The suspended_ctrl maintainers',
    maintainer_email='maintainers@suspended-ctrl.example',
    license='Apache-2.0',
    python_requires='>=3.11,<3.14',
    packages=find_packages(include=[NAME, f'{NAME}.*']),
    package_data={NAME: ['py.typed']},
    data_files=[
        ('share/ament_index/resource_index/packages', [f'resource/{NAME}']),
        (f'share/{NAME}', ['package.xml']),
        *shared('launch'),
        *shared('config'),
    ],
    zip_safe=False,
    install_requires=RUN,
    extras_require={'ros': ROS, 'ament': AMENT, 'test': TEST},
    entry_points={
        'console_scripts': [
            'suspended-ctrl = suspended_ctrl.cli:main',
            *(f'{node} = {NAME}.nodes.{node}:main' for node in NODES),
        ],
    },
)
