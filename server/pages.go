package server

import (
	"crypto/sha256"
	"encoding/base64"
	"strconv"
	"strings"
)

// A page token holds where the next page starts and a tag over that and the list
// it belongs to, so that a token of another list, or one that was tampered with, is
// told apart. It is no secret and any server of the service takes it.
const pageTagBytes = 9

func pageTag(list, next string) string {
	sum := sha256.Sum256([]byte("wideberth page\x00" + list + "\x00" + next))
	return string(sum[:pageTagBytes])
}

// pageToken names where the next page of a list starts.
func pageToken(list, next string) string {
	return base64.RawURLEncoding.EncodeToString([]byte(pageTag(list, next) + next))
}

// pageStart reads a token of a list back, "" for the first page; it faults page_token when the
// token is not one of that list's.
func pageStart(list, token string, f *faults) string {
	if token == "" {
		return ""
	}
	raw, err := base64.RawURLEncoding.Strict().DecodeString(token)
	if err == nil && len(raw) >= pageTagBytes {
		if next := string(raw[pageTagBytes:]); strings.HasPrefix(string(raw), pageTag(list, next)) {
			return next
		}
	}
	f.add(root.at("page_token"), "%s, wanted the next_page_token of the same list", quote(token))
	return ""
}

// pageVersion is pageStart for a list of versions; 0 for the first page.
func pageVersion(list, token string, f *faults) int64 {
	start := pageStart(list, token, f)
	if start == "" {
		return 0
	}
	v, err := strconv.ParseInt(start, 10, 64)
	if err != nil || v < 1 {
		f.add(root.at("page_token"), "%s, wanted the next_page_token of the same list", quote(token))
		return 0
	}
	return v
}

// pageSize fills in the default and coerces what is too large.
func pageSize(asked int32) int {
	if asked == 0 {
		return defaultPageSize
	}
	return min(int(asked), maxPageSize)
}
