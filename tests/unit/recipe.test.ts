import { describe, expect, it } from 'vitest'
import { canonicalJson, recipeHash } from '../../shared/recipe/canonical'
import { recipeDiff } from '../../shared/recipe/diff'
import { readRecipe, RecipeError } from '../../shared/recipe/migrate'
import { recipeText, withRecipeValue } from '../../shared/recipe/sentences'
import { defaultRecipe } from '../../shared/schemas/recipe'
import { keepCount } from '../../shared/schemas/run'

describe('canonical form', () => {
  // RFC 8785, section 3.2.3: property names sorted by UTF-16 code units, whatever their order in the source.
  it('sorts keys by code unit', () => {
    expect(canonicalJson({ '\u20ac': 1, '\r': 2, '1': 3, '\u0080': 4, '\u00f6': 5, '\ud83d\ude00': 6 }))
      .toBe('{"\\r":2,"1":3,"\u0080":4,"\u00f6":5,"\u20ac":1,"\ud83d\ude00":6}')
  })
  it('refuses what JSON cannot hold', () => {
    expect(() => canonicalJson({ a: Number.NaN })).toThrow(RangeError)
  })
  it('hashes equal recipes alike and others not', async () => {
    const reordered = Object.fromEntries(Object.entries(defaultRecipe).reverse())
    expect(await recipeHash(reordered)).toBe(await recipeHash(defaultRecipe))
    expect(await recipeHash(withRecipeValue(defaultRecipe, 'keep.fraction', 0.2))).not.toBe(await recipeHash(defaultRecipe))
  })
})

describe('the paragraph', () => {
  it('reads as sentences', () => {
    expect(recipeText(defaultRecipe, { rankBy: 'peak', blurPx: 1, windowPx: 64, kind: 'star' })).toBe(
      'Repair hot pixels and score each frame by its peak intensity after a blur of 1.0 px. Register in a window of 64 px by cross-correlation, '
      + 'against the best 5 %, refined twice; let parts of the field follow their own air where it differs, and lay the colours on each other. Keep the best 10 %, and combine them by their mean with six-point cubic resampling. Restore nothing.')
  })
  it('marks only what differs', () => {
    const after = withRecipeValue(withRecipeValue(defaultRecipe, 'keep.fraction', 0.02), 'restore.method', 'wiener')
    const marked = recipeDiff(defaultRecipe, after).filter(piece => piece.kind !== 'same')
    expect(marked[0]).toEqual({ kind: 'changed', path: 'keep.fraction', name: 'Keep fraction', before: '10 %', after: '2 %' })
    expect(marked.some(piece => piece.kind === 'added' && piece.text.includes('signal and noise as measured'))).toBe(true)
  })
})

describe('reading recipes', () => {
  it('reads a recipe of version 1, whose values stay as they are', () => {
    const { version, ...rest } = structuredClone(defaultRecipe)
    expect(version).toBeGreaterThan(1)
    const old = { ...rest, version: 1, keep: { fraction: 0.03 }, restore: { scales: 2, gain: 1.8, thresholdSigma: 4 } }
    expect(readRecipe(old)).toMatchObject({ version, keep: { fraction: 0.03 }, score: rest.score, restore: { method: 'wavelets', scales: 2, gainBy: 'hand', gains: new Array(6).fill(1.8), thresholdsSigma: new Array(6).fill(4) } })
    expect(readRecipe({ ...old, restore: { scales: 0, gain: 2, thresholdSigma: 3 } }).restore.method).toBe('nothing')
  })
  it('accepts its own and says what is wrong with others', () => {
    expect(readRecipe(structuredClone(defaultRecipe))).toEqual(defaultRecipe)
    expect(() => readRecipe([])).toThrow(RecipeError)
    expect(() => readRecipe({ version: 99 })).toThrow(/version 99/)
    expect(() => readRecipe(withRecipeValue(defaultRecipe, 'keep.fraction', 4))).toThrow(/keep\.fraction/)
  })
})

describe('keep count', () => {
  it('is at least one frame and at most all', () => {
    expect(keepCount(0.08, 2000)).toBe(160)
    expect(keepCount(0.001, 60)).toBe(1)
    expect(keepCount(1, 60)).toBe(60)
    expect(keepCount(0.5, 0)).toBe(0)
  })
})
