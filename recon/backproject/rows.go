package backproject

// The adders for one to five pairs of delays. They are the innermost loop of the package and are written out: a loop over
// the words of a bundle, or one function for all sizes, takes three times as long in WebAssembly.

func addRow1(row [][1]uint64, t [4][][1]uint64, w [4]walk) {
	t0, t1, t2, t3 := t[0], t[1], t[2], t[3]
	at0, at1, at2, at3 := w[0].at, w[1].at, w[2].at, w[3].at
	for x := range row {
		sum, a, b, c, d := &row[x], &t0[at0>>32], &t1[at1>>32], &t2[at2>>32], &t3[at3>>32]
		sum[0] += a[0] + b[0] + c[0] + d[0]
		at0, at1, at2, at3 = at0+w[0].by, at1+w[1].by, at2+w[2].by, at3+w[3].by
	}
}

func addRow2(row [][2]uint64, t [4][][2]uint64, w [4]walk) {
	t0, t1, t2, t3 := t[0], t[1], t[2], t[3]
	at0, at1, at2, at3 := w[0].at, w[1].at, w[2].at, w[3].at
	for x := range row {
		sum, a, b, c, d := &row[x], &t0[at0>>32], &t1[at1>>32], &t2[at2>>32], &t3[at3>>32]
		sum[0] += a[0] + b[0] + c[0] + d[0]
		sum[1] += a[1] + b[1] + c[1] + d[1]
		at0, at1, at2, at3 = at0+w[0].by, at1+w[1].by, at2+w[2].by, at3+w[3].by
	}
}

func addRow3(row [][3]uint64, t [4][][3]uint64, w [4]walk) {
	t0, t1, t2, t3 := t[0], t[1], t[2], t[3]
	at0, at1, at2, at3 := w[0].at, w[1].at, w[2].at, w[3].at
	for x := range row {
		sum, a, b, c, d := &row[x], &t0[at0>>32], &t1[at1>>32], &t2[at2>>32], &t3[at3>>32]
		sum[0] += a[0] + b[0] + c[0] + d[0]
		sum[1] += a[1] + b[1] + c[1] + d[1]
		sum[2] += a[2] + b[2] + c[2] + d[2]
		at0, at1, at2, at3 = at0+w[0].by, at1+w[1].by, at2+w[2].by, at3+w[3].by
	}
}

func addRow4(row [][4]uint64, t [4][][4]uint64, w [4]walk) {
	t0, t1, t2, t3 := t[0], t[1], t[2], t[3]
	at0, at1, at2, at3 := w[0].at, w[1].at, w[2].at, w[3].at
	for x := range row {
		sum, a, b, c, d := &row[x], &t0[at0>>32], &t1[at1>>32], &t2[at2>>32], &t3[at3>>32]
		sum[0] += a[0] + b[0] + c[0] + d[0]
		sum[1] += a[1] + b[1] + c[1] + d[1]
		sum[2] += a[2] + b[2] + c[2] + d[2]
		sum[3] += a[3] + b[3] + c[3] + d[3]
		at0, at1, at2, at3 = at0+w[0].by, at1+w[1].by, at2+w[2].by, at3+w[3].by
	}
}

func addRow5(row [][5]uint64, t [4][][5]uint64, w [4]walk) {
	t0, t1, t2, t3 := t[0], t[1], t[2], t[3]
	at0, at1, at2, at3 := w[0].at, w[1].at, w[2].at, w[3].at
	for x := range row {
		sum, a, b, c, d := &row[x], &t0[at0>>32], &t1[at1>>32], &t2[at2>>32], &t3[at3>>32]
		sum[0] += a[0] + b[0] + c[0] + d[0]
		sum[1] += a[1] + b[1] + c[1] + d[1]
		sum[2] += a[2] + b[2] + c[2] + d[2]
		sum[3] += a[3] + b[3] + c[3] + d[3]
		sum[4] += a[4] + b[4] + c[4] + d[4]
		at0, at1, at2, at3 = at0+w[0].by, at1+w[1].by, at2+w[2].by, at3+w[3].by
	}
}
