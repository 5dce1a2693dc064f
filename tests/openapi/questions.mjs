// SPDX-License-Identifier: GPL-3.0-or-later
// Questions that must be answered, beside the examples of the description: every member and form a
// question takes, and every verdict that the demo mechanisms can give. [mechanism, kind, question,
// expected code (null: any)]
const pose = { x: 15, y: -10, rz: 6 };
const zyx = { yaw: 4, pitch: -6, roll: 8 };
const home = { drives: { m1: 90, m2: 180, m3: 270, m4: 0 } };
const struts = { a1: 520, a2: 520, a3: 520, a4: 520, a5: 520, a6: 520 };
const elbows = { 'shoulder-1': 0, 'elbow-1': 0, 'shoulder-2': 0, 'elbow-2': 0, 'shoulder-3': 0,
  'elbow-3': 0, 'shoulder-4': 0, 'elbow-4': 0 };
const half = Math.SQRT1_2;

export const asked = [
  ['label-stage', 'inverse', { pose }, 1],
  ['label-stage', 'inverse', { pose, near: { x: 0, y: 0, rz: 0 } }, 1],
  ['label-stage', 'inverse', { pose, near: home }, 1],
  ['label-stage', 'inverse', { pose, near: { joints: elbows } }, 1],
  ['label-stage', 'inverse', { pose, mode: '+-++', revision: 1, ref: 'a ~!', tool: 'camera',
    units: { length: 'mm', angle: 'deg' }, orientation: 'zyx' }, 1],
  ['label-stage', 'inverse', { pose: { x: 0.015, y: -0.01, rz: 0.1 },
    units: { length: 'm', angle: 'rad' } }, 1],
  ['label-stage', 'inverse', { pose, tool: { body: 'plate', at: [10, 0, 0] } }, 1],
  ['label-stage', 'inverse', { pose, tool: { name: 'probe', body: 'plate', at: [0, 10, 5],
    orientation: { zyx: { yaw: 90 } } } }, 1],
  ['label-stage', 'inverse', { pose: { x: 15, y: -10, z: 3, rz: 6 } }, 4],
  ['label-stage', 'inverse', { pose: { x: 900, y: 0, rz: 0 } }, 4],
  ['tilt-table', 'inverse', { pose: { x: 0, y: 0, z: 530,
    quaternion: { w: 1, x: 0, y: 0, z: 0 } } }, 1],
  ['tilt-table', 'inverse', { pose: { x: 20, y: -15, z: 530,
    rotation_vector: { x: 3, y: 2, z: 1 } }, orientation: 'rotation_vector' }, 1],
  ['tilt-table', 'inverse', { pose: { x: 0, y: 0, z: 530, zyx }, orientation: 'direction' }, 1],
  ['tilt-table', 'inverse', { pose: { x: 0, y: 0, z: 300, zyx } }, 3],
  ['case-packer', 'inverse', { pose: { x: 460, y: 120, z: 560,
    zyx: { yaw: 15, pitch: 0, roll: 180 } } }, 1],
  ['case-packer', 'inverse', { pose: { x: 460, y: 120, z: 560,
    quaternion: { w: 0, x: half, y: half, z: 0 } }, mode: 'front-high-plain' }, null],
  ['lid-turner', 'inverse', { pose: { x: 20, y: -15, z: 420, joints: { shaft: 360 } } }, 1],
  ['lid-turner', 'inverse', { pose: { x: 20, y: -15, z: 420, joints: { shaft: 9999 } } }, null],
  ['belt-hopper', 'inverse', { pose: { x: 35, y: -25, z: 400 } }, 1],

  ['label-stage', 'forward', { ...home, near: { pose } }, 1],
  ['label-stage', 'forward', { ...home, near: { pose, mode: '++++' } }, 1],
  ['label-stage', 'forward', { drives: { m1: 90, m2: 180, m3: 270 } }, 1],
  ['label-stage', 'forward', { drives: { m1: 90, m2: 180, m3: 270, m4: 8 } }, 8],
  ['tilt-table', 'forward', { drives: struts, all: true }, null],
  ['tilt-table', 'forward', { drives: struts, all: false,
    near: { bodies: { table: { x: 0, y: 0, z: 0, rz: 0 } } } }, null],
  ['tilt-table', 'forward', { drives: { ...struts, a1: 1520 } }, null],
  ['case-packer', 'forward', { drives: { j1: 0, j2: 10, j3: 20, j4: 0, j5: 60, j6: 0 } }, null],
  ['lid-turner', 'forward', { drives: { 'upper-north': 888, 'upper-west': 888, 'upper-east': 888,
    'lower-north': 740, 'lower-west': 740, 'lower-east': 740 } }, 1],

  ['label-stage', 'jacobian', { ...home, point: [10, 0, 0], in: 'tool' }, 1],
  ['label-stage', 'jacobian', { joints: elbows, in: 'fixed' }, 1],
  ['tilt-table', 'jacobian', { drives: struts }, 1],
  ['case-packer', 'jacobian', { drives: { j1: 0, j2: 10, j3: 20, j4: 0, j5: 0, j6: 0 } }, null],
  ['case-packer', 'jacobian', { drives: { j1: 0, j2: 10, j3: 20, j4: 0, j5: 60, j6: 0 },
    units: { length: 'm', angle: 'rad' } }, null],
  ['lid-turner', 'jacobian', { pose: { x: 20, y: -15, z: 420, joints: { shaft: 360 } } }, 1],
  ['label-stage', 'jacobian', { pose: { x: 900, y: 0, rz: 0 } }, 4],

  ['tilt-table', 'margin', { bodies: { table: { x: 0, y: 0, z: 0,
    quaternion: { w: 1, x: 0, y: 0, z: 0 } } } }, 1],
  ['lid-turner', 'margin', { pose: { x: 0.02, y: -0.015, z: 0.42, joints: { shaft: 360 } },
    units: { length: 'm' } }, 1],
  ['case-packer', 'margin', { drives: { j1: 0, j2: 10, j3: 20, j4: 0, j5: 0, j6: 0 } }, null],
  // One limb stretched: singular, held, one drive no longer spare.
  ['label-stage', 'margin', { pose: { x: 80, y: 60, rz: 0 } }, 1],
  ['label-stage', 'margin', { pose: { x: 900, y: 0, rz: 0 } }, 4],
  ['label-stage', 'margin', { drives: { m1: 90, m2: 180, m3: 270, m4: 8 } }, 8],
  ['belt-hopper', 'margin', { pose: { x: 35, y: -25, z: 400 } }, null],

  ['label-stage', 'reach', { pose, mode: 'any', margin_min: 1, budget: 1000, timeout_ms: 50 }, 1],
  ['label-stage', 'reach', { pose, margin_min: 99 }, 2],
  ['label-stage', 'reach', { pose, margin_min: { accuracy: 1, load: 1, speed: 1, spare: 1,
    travel: 0.01, hold: 0.01 } }, 1],
  ['label-stage', 'reach', { pose, from: home, budget: 4096, timeout_ms: 60000 }, 1],
  ['label-stage', 'reach', { pose, from: { drives: { m1: 90, m2: 180, m3: 270, m4: 8 } } }, 8],
  ['label-stage', 'reach', { pose: { x: 900, y: 0, rz: 0 } }, 4],
  ['tilt-table', 'reach', { pose: { x: 0, y: 0, z: 300, zyx } }, 3],
  ['case-packer', 'reach', { pose: { x: 460, y: 120, z: 560,
    zyx: { yaw: 15, pitch: 0, roll: 180 } }, mode: '-3' }, null],
  ['case-packer', 'reach', { pose: { x: 460, y: 120, z: 560,
    zyx: { yaw: 15, pitch: 0, roll: 180 } }, mode: '-2' }, null],
  ['lid-turner', 'reach', { pose: { x: 20, y: -15, z: 420, joints: { shaft: 360 } },
    mode: 'all-standing' }, null],

  ['label-stage', 'path', { from: home, through: [{ line: 'N10', move: 'line', pose },
    { line: 'N 20 ~!', move: 'circle', pose: { x: -15, y: -10, rz: 0 }, via: { x: 0, y: 10 } },
    { move: 'joints', ...home }, { move: 'joints', pose }] }, null],
  ['label-stage', 'path', { from: { pose, mode: '++++' }, through: [{ move: 'line',
    pose: { x: 0, y: 0, rz: 0 } }], certificate: true, margin_min: { load: 0.5, hold: 0.01 },
    budget: 4096, timeout_ms: 60000, revision: 1, ref: 'p1', tool: 'camera', orientation: 'zyx' },
    null],
  ['label-stage', 'path', { from: home, through: [{ move: 'line',
    pose: { x: 0.005, y: 0, rz: 0.1 } }],
    units: { length: 'm', angle: 'rad' }, tool: { body: 'plate', at: [0.01, 0, 0] } }, null],
  ['label-stage', 'path', { from: home, through: [{ move: 'line',
    pose: { x: 900, y: 0, rz: 0 } }, { move: 'line', pose }] }, null],
  ['label-stage', 'path', { from: { drives: { ...home.drives, m4: 8 } },
    through: [{ move: 'line', pose }] }, 8],
  ['label-stage', 'path', { from: { pose: { x: 900, y: 0, rz: 0 } },
    through: [{ move: 'line', pose }] }, null],
  ['tilt-table', 'path', { from: { drives: struts }, through: [{ move: 'line',
    pose: { x: 20, y: -15, z: 530, zyx } }] }, null],
  ['case-packer', 'path', { from: { drives: { j1: 0, j2: 10, j3: 20, j4: 0, j5: 60, j6: 0 } },
    through: [{ move: 'joints', drives: { j1: 10, j2: 10, j3: 20, j4: 0, j5: 60,
      j6: 0 } }] }, null],
  ['lid-turner', 'path', { from: { pose: { x: 0, y: 0, z: 420, joints: { shaft: 0 } } },
    through: [{ move: 'line', pose: { x: 20, y: -15, z: 420, joints: { shaft: 360 } } }] }, null],
  ['belt-hopper', 'path', { from: { pose: { x: 35, y: -25, z: 400 } }, through: [{ move: 'circle',
    via: { x: 0, y: 0, z: 400 }, pose: { x: -35, y: -25, z: 400 } }] }, null],

  ['label-stage', 'free-travel', { ...home, reach: { position: 40, angle: 30 } }, null],
  ['label-stage', 'free-travel', { pose, mode: '++++', reach: {}, margin_min: 0.5, budget: 64,
    timeout_ms: 60000, ref: 'f', tool: 'camera', units: { length: 'm' } }, null],
  ['tilt-table', 'free-travel', { drives: struts, reach: { position: 5, angle: 2 } }, null],
  ['label-stage', 'free-travel', { pose: { x: 900, y: 0, rz: 0 } }, 4],
  ['label-stage', 'margin', { ...home, distance: {} }, 1],
  ['label-stage', 'margin', { ...home, distance: { budget: 64 }, timeout_ms: 60000 }, 1],
];

// Paths as tables: [mechanism, query, table, expected code (null: any)].
const start = 'from.m1=90&from.m2=180&from.m3=270&from.m4=0';
export const tables = [
  ['label-stage', `${start}&ref=t1&margin_min=0.5&budget=4096&timeout_ms=60000&certificate=true`,
    'line,move,x,y,rz,via.x,via.y\r\nN10,line,15,-10,6,,\r\n'
    + '"N,20",circle,-15,-10,0,0,10\r\n', null],
  ['label-stage', `${start}&units.length=m&units.angle=rad&tool=camera&revision=1&orientation=zyx`
    + '&margin_min.load=0.5&margin_min.accuracy=0.5&margin_min.speed=0.5&margin_min.spare=0.5'
    + '&margin_min.travel=0.01'
    + '&margin_min.hold=0.01', '\ufeffmove,x,y,yaw\nline,0.005,0,0.05\n\njoints,0,0,0\n', null],
  ['label-stage', 'from.x=0&from.y=0&from.rz=0&mode=%2B+%2B%2B', 'move,m1,drive.m2,m3,m4\n'
    + 'joints,90,181,270,0\n', null],
  ['lid-turner', 'from.x=0&from.y=0&from.z=420&from.joint.shaft=0',
    'move,x,y,z,joint.shaft\nline,5,0,420,90\n', null],
  ['tilt-table', 'from.a1=520&from.a2=520&from.a3=520&from.a4=520&from.a5=520&from.a6=520',
    'move, x, y, z, qw, qx, qy, qz\nline, 5, 0, 525, 1, 0, 0, 0\n', null],
];

// Batches of every kind: a good member, a bad one, what holds for all, a ref of its own.
export const batches = [
  ['inverse', { pose }], ['forward', home], ['jacobian', home], ['margin', home],
  ['reach', { pose }],
].map(([kind, good]) => [kind, { ref: 'b1', units: { angle: 'deg' }, tool: 'camera', revision: 1,
  orientation: 'rz', batch: [good, { ...good, ref: 'm2', tool: 'no-such-tool' },
    { ...good, units: { length: 'm', angle: 'rad' } }] }]);

// Query strings that must be answered: [mechanism, kind, query].
export const queries = [
  ['label-stage', 'reach', 'x=15&y=-10&rz=6&mode=+%2B++&margin_min=0.5&ref=N10'],
  ['label-stage', 'reach', 'x=15&y=-10&rz=6&mode=any&tool=camera&revision=1&orientation=zyx'],
  ['label-stage', 'reach', 'x=15&y=-10&rz=6&from.m1=90&from.m2=180&from.m3=270&from.m4=0'
    + '&budget=4096&timeout_ms=60000'],
  ['label-stage', 'reach', 'x=15&y=-10&yaw=6&margin_min.accuracy=1&margin_min.load=1'
    + '&margin_min.speed=1&margin_min.spare=1&margin_min.travel=0.01&margin_min.hold=0.01'],
  ['tilt-table', 'reach', 'x=20&y=-15&z=530&yaw=4&pitch=-6&roll=8'],
  ['tilt-table', 'reach', 'x=20&y=-15&z=530&qw=1&qx=0&qy=0&qz=0'],
  ['tilt-table', 'reach', 'x=20&y=-15&z=530&rvx=1&rvy=2&rvz=3'],
  ['tilt-table', 'reach', 'x=20&y=-15&z=300&yaw=4&pitch=-6&roll=8'],
  ['lid-turner', 'reach', 'x=20&y=-15&z=420&joint.shaft=360'],
  ['label-stage', 'margin', 'm1=90&m2=180&drive.m3=270&m4=0&tool=camera&revision=1&ref=d1'
    + '&orientation=quaternion'],
];

// Verdicts that these questions must have brought, so that their forms were checked.
export const verdicts = [1, 2, 3, 4, 5, 8];
