/** What a log may show of an address: no token of a share link, an invitation or a reset, and no query at all. */
export function withoutTokens(path: string): string {
  return path.replace(/\?.*$/, '').replace(/^(\/api\/share|\/s)\/[^/]+/, '$1/…')
}
