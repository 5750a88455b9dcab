"""The project as a package: its files agree, its source keeps the house rules."""

import ast
import os
from pathlib import Path
import re
import runpy
import subprocess
import sys
import types

import pytest

import suspended_ctrl

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = ROOT / 'suspended_ctrl'
MODULES = sorted(PACKAGE.rglob('*.py'))
TESTS = sorted((ROOT / 'test').rglob('*.py'))
LINES_MAX = 300

# Distribution and rosdep key of what the package imports under another name.
DISTRIBUTIONS = {'ruamel': 'ruamel.yaml'}
ROSDEP = {
    'cvxpy': 'python3-cvxpy-pip', 'mujoco': 'python3-mujoco-pip', 'rosbags': 'python3-rosbags-pip',
}
WITHOUT_ROSDEP_KEY = {'daqp'}
COME_WITH = {'annotated_types': 'pydantic', 'pydantic_core': 'pydantic'}


def relative(path: Path) -> str:
    """Name a file as a person would."""
    return str(path.relative_to(ROOT))


@pytest.fixture(scope='module')
def setup_arguments() -> dict[str, object]:
    """Return what setup.py hands to setuptools."""
    given: dict[str, object] = {}
    stand_in = types.ModuleType('setuptools')
    stand_in.setup = given.update
    stand_in.find_packages = lambda **_: []
    with pytest.MonkeyPatch.context() as patch:
        patch.setitem(sys.modules, 'setuptools', stand_in)
        patch.chdir(ROOT)
        runpy.run_path('setup.py')
    return given


@pytest.fixture(scope='module')
def manifest():
    """Return package.xml as the ROS tools read it."""
    catkin_pkg = pytest.importorskip('catkin_pkg.package', reason='catkin_pkg is not installed')
    warnings: list[str] = []
    package = catkin_pkg.parse_package(str(ROOT / 'package.xml'), warnings=warnings)
    package.validate(warnings=warnings)
    assert warnings == []
    return package


def imports_of(path: Path) -> set[str]:
    """Top-level names that a file imports from anywhere, at any depth."""
    names: set[str] = set()
    for node in ast.walk(ast.parse(path.read_text(encoding='utf-8'))):
        if isinstance(node, ast.Import):
            names |= {alias.name.split('.')[0] for alias in node.names}
        elif isinstance(node, ast.ImportFrom) and node.module and node.level == 0:
            names.add(node.module.split('.')[0])
    return names - set(sys.stdlib_module_names) - {'suspended_ctrl'}


def test_one_version(setup_arguments, manifest):
    assert setup_arguments['version'] == suspended_ctrl.__version__ == manifest.version
    assert setup_arguments['name'] == manifest.name == 'suspended_ctrl'


def test_manifest_is_an_ament_python_package(setup_arguments, manifest):
    assert manifest.package_format == 3
    assert manifest.get_build_type() == 'ament_python'
    assert manifest.licenses == [setup_arguments['license']] == ['Apache-2.0']
    assert (ROOT / 'LICENSE').read_text(encoding='utf-8').split()[:4] == [
        'Apache', 'License', 'Version', '2.0,']
    marker = ROOT / 'resource' / manifest.name
    assert marker.read_bytes() == b''


def test_every_import_is_declared(setup_arguments, manifest):
    libraries = {re.split(r'[<>=~\[]', line)[0] for line in setup_arguments['install_requires']}
    ros = {re.split(r'[<>=~\[]', line)[0].removeprefix('ros-jazzy-').replace('-', '_')
           for line in setup_arguments['extras_require']['ros']}
    declared = {depend.name for depend in manifest.exec_depends}
    missing = []
    for path in MODULES:
        for name in imports_of(path):
            name = COME_WITH.get(name, name)
            library = DISTRIBUTIONS.get(name, name)
            key = ROSDEP.get(name, f'python3-{library}')
            if library in libraries:
                found = key in declared or name in WITHOUT_ROSDEP_KEY
            else:
                # A message package that another one's wheel brings is declared all the same.
                found = name in declared and name in ros
            if not found:
                missing.append(f'{relative(path)}: {name}')
    assert missing == []


def test_every_executable_is_there(setup_arguments):
    lines = setup_arguments['entry_points']['console_scripts']
    scripts = dict(line.split(' = ') for line in lines)
    assert set(scripts) == {
        'suspended-ctrl', 'state_estimator', 'wrench_controller', 'effort_allocator',
        'safety_supervisor', 'mission_player', 'rig_bench'}
    for target in scripts.values():
        module, function = target.split(':')
        tree = ast.parse((ROOT / f'{module.replace(".", "/")}.py').read_text(encoding='utf-8'))
        names = {name for node in tree.body for name in names_made(node)}
        assert function in names, target


def names_made(node: ast.stmt) -> set[str]:
    """Names that a statement of a module makes."""
    if isinstance(node, ast.FunctionDef | ast.ClassDef):
        return {node.name}
    if isinstance(node, ast.Assign):
        return {target.id for target in node.targets if isinstance(target, ast.Name)}
    if isinstance(node, ast.Import | ast.ImportFrom):
        return {alias.asname or alias.name for alias in node.names}
    return set()


def test_everything_shared_is_installed(setup_arguments):
    installed = {name for _, names in setup_arguments['data_files'] for name in names}
    wanted = {relative(path) for folder in ('launch', 'config')
              for path in (ROOT / folder).rglob('*') if path.is_file()}
    assert wanted
    assert wanted | {'package.xml', 'resource/suspended_ctrl'} == installed
    for place, names in setup_arguments['data_files']:
        for name in names:
            folder = str(Path(name).parent)
            assert place in (f'share/suspended_ctrl/{folder}', 'share/suspended_ctrl',
                             'share/ament_index/resource_index/packages')


def test_ci_runs_make_test():
    script = ROOT / '.ci' / 'run'
    assert os.access(script, os.X_OK)
    assert re.search(r'^exec make test\b', script.read_text(encoding='utf-8'), re.MULTILINE)


def test_nothing_but_the_nodes_needs_ros():
    """Everything else imports where neither rclpy nor a message package can be."""
    blocked = ('rclpy', 'launch', 'launch_ros', 'ament_index_python', 'builtin_interfaces',
               'rcl_interfaces', 'rosgraph_msgs', 'std_msgs', 'geometry_msgs', 'sensor_msgs',
               'nav_msgs', 'trajectory_msgs', 'diagnostic_msgs', 'lifecycle_msgs', 'std_srvs')
    names = []
    for path in MODULES:
        parts = path.relative_to(ROOT).with_suffix('').parts
        if parts[1] in ('nodes', '__main__'):
            continue
        names.append('.'.join(parts).removesuffix('.__init__'))
    program = (
        'import importlib, sys\n'
        'class Blocked:\n'
        '    def find_spec(self, name, path=None, target=None):\n'
        f'        if name.split(".")[0] in {blocked!r}:\n'
        '            raise ImportError(f"{name} is blocked")\n'
        'sys.meta_path.insert(0, Blocked())\n'
        f'for name in {names!r}:\n'
        '    importlib.import_module(name)\n')
    done = subprocess.run([sys.executable, '-c', program], cwd=ROOT, capture_output=True,
                          text=True, timeout=240, check=False)
    assert done.returncode == 0, done.stderr[-2000:]


def test_a_module_reads_in_one_sitting():
    lengths = {relative(path): len(path.read_text(encoding='utf-8').splitlines())
               for path in MODULES}
    assert {name: length for name, length in lengths.items() if length > LINES_MAX} == {}


LEFT_OVER = re.compile(r'\b(TODO|FIXME|XXX|HACK)\b|/(home|tmp|root|Users)/')


def test_nothing_is_left_over():
    listed = subprocess.run(['git', 'ls-files'], cwd=ROOT, capture_output=True, text=True,
                            check=False)
    if listed.returncode != 0:
        pytest.skip('not a git checkout')
    found = []
    for name in listed.stdout.splitlines():
        path = ROOT / name
        if path == Path(__file__) or not path.is_file():
            continue
        try:
            text = path.read_text(encoding='utf-8')
        except UnicodeDecodeError:
            continue
        found += [f'{name}:{number}: {line.strip()}'
                  for number, line in enumerate(text.splitlines(), 1) if LEFT_OVER.search(line)]
    assert found == []
