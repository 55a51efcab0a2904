package measure

// MergeShifted adds every value of o moved by shift, which may be negative;
// what would fall below 0 counts as 0. A value is known to its bucket, so it
// counts at the bucket's midpoint.
func (h *Hist) MergeShifted(o *Hist, shift int64) {
	o.Each(func(low, high, count uint64) {
		v := max(0, int64(low+(high-low)/2)+shift)
		h.AddCount(uint64(v), count)
	})
}

// AddCount counts v n times.
func (h *Hist) AddCount(v, n uint64) {
	if n == 0 {
		return
	}
	if v-h.min > h.span || h.n == 0 {
		h.widen(v)
	}
	h.n += n
	i := bucketOf(v)
	if i >= buckets {
		i = buckets - 1
		h.clipped += n
	}
	h.addMany(i, n)
}
