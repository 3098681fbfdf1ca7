// Plant files for the tests: invented machines.

export const ROVER = `# Orchard rover. An invented vehicle.
plant: orchard-rover
description: Four-wheeled rover between tree rows.

states:
  px: {unit: m, envelope: [-30, 30]}
  py: {unit: m, envelope: [-30, 30]}
  heading: {unit: deg, envelope: [-180, 180]}
  speed: {unit: m/s, envelope: [0.6, 2.4]}
inputs:
  drive: {unit: m/s^2, range: [-1.5, 1.5]}
  turn: {unit: rad/s, range: [-0.6, 0.6]}
parameters:
  turnGain: 1.0
rates:
  px: speed * cos(heading)
  py: speed * sin(heading)
  heading: turnGain * turn
  speed: drive
unknown:
  - {rate: speed, from: [speed]}
  - {gain: turn, in: heading, from: [speed]}
leftover:
  slipAlong: {unit: m/s, on: {px: cos(heading), py: sin(heading)}}
  slipAcross: {unit: m/s, on: {px: -sin(heading), py: cos(heading)}}
  turnDrift: {unit: rad/s, on: {heading: 1}}
  speedPush: {unit: m/s^2, on: {speed: 1}}
symmetry:
  translation: [px, py]
  rotation: {position: [px, py], heading: heading}
logs:
  files: [../data/orchard-rover.arrow]
  time: {column: time, unit: s}
  run: run
  columns:
    heading: {column: yaw, unit: rad}
  maxGap: 0.1
  unsupported: refuse
disturbance:
  confidence: 0.9
  window: auto
  split: {fit: 0.5, calibration: 0.3, test: 0.2}
margin:
  minimise: planar
  authority: 0.4
  rate: auto
  initialDistance: 0
networks:
  residual: {width: 16, steps: 1500}
  metric: {width: 16, steps: 1500, rounds: 6, from: [speed]}
seed: 1
`;

// Trolley with a load on a rope of constant length; the trolley's acceleration is the input (sway from the vertical).
export const CRANE = `plant: yard-crane
states:
  trolley: {unit: m, envelope: [0, 40]}
  trolleySpeed: {unit: m/s, envelope: [-1.5, 1.5]}
  sway: {unit: deg, envelope: [-12, 12]}
  swayRate: {unit: deg/s, envelope: [-15, 15]}
inputs:
  accel: {unit: m/s^2, range: [-0.5, 0.5]}
parameters: {gravity: 9.80665, rope: 8}
rates:
  trolley: trolleySpeed
  trolleySpeed: accel
  sway: swayRate
  swayRate: -(gravity * sin(sway) + accel * cos(sway)) / rope
unknown:
  - {rate: swayRate, from: [sway, swayRate]}
leftover:
  trolleyPush: {unit: m/s^2, on: {trolleySpeed: 1}}
  swayPush: {unit: deg/s^2, on: {swayRate: 1}}
symmetry: {translation: [trolley]}
logs: {files: [../data/yard-crane.csv]}
margin: {minimise: sway}
`;

// Surface boat with quadratic damping, world-frame position and body-frame velocities.
export const BOAT = `plant: survey-boat
states:
  px: {unit: m, envelope: [-50, 50]}
  py: {unit: m, envelope: [-50, 50]}
  heading: {unit: deg, envelope: [-180, 180]}
  surge: {unit: m/s, envelope: [0.5, 2]}
  sway: {unit: m/s, envelope: [-0.4, 0.4]}
  yawRate: {unit: deg/s, envelope: [-20, 20]}
inputs:
  push: {unit: N, range: [-40, 120]}
  yawMoment: {unit: N m, range: [-60, 60]}
parameters: {massX: 95, massY: 130, inertia: 45, dragX: 12, dragXX: 18, dragY: 60, dragYY: 90, dragN: 35}
rates:
  px: surge * cos(heading) - sway * sin(heading)
  py: surge * sin(heading) + sway * cos(heading)
  heading: yawRate
  surge: (push + massY * sway * yawRate - dragX * surge - dragXX * surge * abs(surge)) / massX
  sway: (-massX * surge * yawRate - dragY * sway - dragYY * sway * abs(sway)) / massY
  yawRate: (yawMoment - dragN * yawRate - (massY - massX) * surge * sway) / inertia
unknown:
  - {rate: sway, from: [surge, sway, yawRate]}
  - {rate: surge, from: [surge]}
leftover:
  driftAlong: {unit: m/s, on: {px: cos(heading), py: sin(heading)}}
  driftAcross: {unit: m/s, on: {px: -sin(heading), py: cos(heading)}}
  surgePush: {unit: m/s^2, on: {surge: 1}}
  swayPush: {unit: m/s^2, on: {sway: 1}}
  yawPush: {unit: deg/s^2, on: {yawRate: 1}}
symmetry:
  rotation: {position: [px, py], heading: heading}
logs:
  files: [../data/survey-boat.arrow]
margin: {minimise: across}
`;
