// Package exact holds the elementary functions of the judging core, written so
// that they give the same bits on every CPU and in every build.
//
// The standard library cannot promise that: its Exp is assembly on some
// architectures, and its portable code may be compiled to fused multiply-adds on
// others (arm64, riscv64, GOAMD64=v3), which round once where two roundings are
// written. A row digest that must survive a change of machine needs better.
//
// The rule here, and in all of qc: a floating-point product that feeds a sum or a
// difference is written float64(a*b) + c. The language specification says that
// an explicit conversion rounds, so the compiler may not fuse across it. Only
// +, -, *, / and Sqrt are used, which IEEE 754 rounds exactly everywhere.
//
// Source: the algorithms and coefficients are those of FreeBSD's msun (fdlibm),
// (c) 1993 Sun Microsystems, Inc., freely usable with this notice kept: "Developed
// at SunPro, a Sun Microsystems, Inc. business. Permission to use, copy, modify,
// and distribute this software is freely granted, provided that this notice is
// preserved." The reduction of very large angles follows the Go standard library
// (Payne and Hanek), (c) The Go Authors, BSD licence.
//
// Accuracy: below 1 ulp for Exp, Log, Sin, Cos, Asin, Acos, Atan and Pow, below 2 ulp
// for Tan and Atan2 and for angles beyond 1.6e6 rad. Special values are those of
// the package math.
package exact
