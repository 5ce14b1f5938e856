/** The simulator, as the rest of the core sees it. */
export { demoScene, demoScenes, type DemoScene } from './demos'
export { rehearsalReader, type RehearsalReader } from './reader'
export { rehearsalSer, serHeader, type SerHeader, type SerNames } from './ser'
export { createSimulator, type Simulator } from './simulator'
export { skyToPixels } from './scene'
export { pixelScaleArcsec, rehearsalSpecSchema, type FrameTruth, type RehearsalSpec, type Scene } from './spec'
