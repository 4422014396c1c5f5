package api

import "slices"

const (
	pageUsual = 100
	pageMost  = 1000
)

func pageSize(asked *int) int {
	if asked == nil {
		return pageUsual
	}
	return min(*asked, pageMost)
}

// pageOf cuts a page out of a list that is in memory anyway. The cursor is the key of the last item of the page before.
func pageOf[T any](list []T, key func(T) string, cursor *string, asked *int) (page []T, next *string, err error) {
	if cursor != nil {
		at := slices.IndexFunc(list, func(v T) bool { return key(v) == *cursor })
		if at < 0 {
			return nil, nil, badCursor()
		}
		list = list[at+1:]
	}
	if limit := pageSize(asked); len(list) > limit {
		list = list[:limit]
		last := key(list[limit-1])
		next = &last
	}
	return list, next, nil
}
