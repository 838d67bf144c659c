#include "textflag.h"

// Where ·logExp holds its constants.
#define LEAST 0
#define MOST 8
#define L1 16
#define L2 24
#define L3 32
#define L4 40
#define L5 48
#define L6 56
#define L7 64
#define HALF 72
#define TWO 80
#define LN2HI 88
#define LN2LO 96
#define LOG2E 104
#define E1 112
#define E2 120
#define E3 128
#define E4 136
#define E5 144
#define ONE 152
#define LIMIT 160
#define MAGIC 168
#define ROOT 176
#define BIAS 184
#define EXPONENT 192
#define WHOLE 200

#define ALL(K, Y) VBROADCASTSD (K)(BX), Y

// func logsAVX2(dst, x *float64, n int) (done int)
// Four at a time as log takes one, until four of which one is not usual; n is a multiple of four, not zero.
TEXT ·logsAVX2(SB), NOSPLIT, $0-32
	MOVQ dst+0(FP), DI
	MOVQ x+8(FP), SI
	MOVQ n+16(FP), CX
	LEAQ ·logExp(SB), BX
	XORQ AX, AX

four:
	VMOVUPD (SI)(AX*8), Y0
	ALL(LEAST, Y1)
	ALL(MOST, Y2)
	VCMPPD $13, Y1, Y0, Y1       // x >= least, false for NaN
	VCMPPD $2, Y2, Y0, Y2        // x <= most
	VANDPD Y2, Y1, Y1
	VMOVMSKPD Y1, DX
	CMPL DX, $15
	JNE done
	ALL(ROOT, Y1)
	ALL(BIAS, Y2)
	ALL(EXPONENT, Y3)
	ALL(WHOLE, Y4)
	ALL(MAGIC, Y5)
	VPSUBQ Y1, Y0, Y1
	VPADDQ Y2, Y1, Y1            // u
	VPAND Y3, Y1, Y3
	VPSRLQ $52, Y1, Y1
	VPOR Y4, Y1, Y1
	VSUBPD Y5, Y1, Y1            // k
	VPSUBQ Y3, Y0, Y0
	VPADDQ Y2, Y0, Y0
	ALL(ONE, Y2)
	VSUBPD Y2, Y0, Y0            // f
	ALL(TWO, Y2)
	VADDPD Y2, Y0, Y2
	VDIVPD Y2, Y0, Y2            // s
	VMULPD Y2, Y2, Y3            // s2
	VMULPD Y3, Y3, Y4            // s4
	ALL(L7, Y5)
	ALL(L5, Y6)
	VMULPD Y5, Y4, Y5
	VADDPD Y5, Y6, Y5
	ALL(L3, Y6)
	VMULPD Y5, Y4, Y5
	VADDPD Y5, Y6, Y5
	ALL(L1, Y6)
	VMULPD Y5, Y4, Y5
	VADDPD Y5, Y6, Y5
	VMULPD Y5, Y3, Y5            // t1
	ALL(L6, Y6)
	ALL(L4, Y7)
	VMULPD Y6, Y4, Y6
	VADDPD Y6, Y7, Y6
	ALL(L2, Y7)
	VMULPD Y6, Y4, Y6
	VADDPD Y6, Y7, Y6
	VMULPD Y6, Y4, Y6            // t2
	VADDPD Y6, Y5, Y5
	ALL(HALF, Y6)
	VMULPD Y6, Y0, Y6
	VMULPD Y0, Y6, Y6            // h
	VADDPD Y5, Y6, Y5
	VMULPD Y5, Y2, Y5            // s·(h + t1 + t2)
	ALL(LN2LO, Y7)
	VMULPD Y7, Y1, Y7
	VADDPD Y7, Y5, Y5
	VSUBPD Y5, Y6, Y5
	VSUBPD Y0, Y5, Y5
	ALL(LN2HI, Y7)
	VMULPD Y7, Y1, Y7
	VSUBPD Y5, Y7, Y5
	VMOVUPD Y5, (DI)(AX*8)
	ADDQ $4, AX
	CMPQ AX, CX
	JLT four

done:
	MOVQ AX, done+24(FP)
	VZEROUPPER
	RET

// func expsAVX2(dst, x *float64, n int) (done int)
// Four at a time as exp takes one, likewise.
TEXT ·expsAVX2(SB), NOSPLIT, $0-32
	MOVQ dst+0(FP), DI
	MOVQ x+8(FP), SI
	MOVQ n+16(FP), CX
	LEAQ ·logExp(SB), BX
	XORQ AX, AX
	VPCMPEQD Y15, Y15, Y15
	VPSRLQ $1, Y15, Y15          // all but the sign

four:
	VMOVUPD (SI)(AX*8), Y0
	ALL(LIMIT, Y1)
	VANDPD Y15, Y0, Y2
	VCMPPD $2, Y1, Y2, Y1        // |x| <= limit, false for NaN
	VMOVMSKPD Y1, DX
	CMPL DX, $15
	JNE done
	ALL(LOG2E, Y1)
	VMULPD Y1, Y0, Y1
	VROUNDPD $0, Y1, Y1          // k
	ALL(LN2HI, Y2)
	VMULPD Y2, Y1, Y2
	VSUBPD Y2, Y0, Y2            // hi
	ALL(LN2LO, Y3)
	VMULPD Y3, Y1, Y3            // lo
	VSUBPD Y3, Y2, Y4            // r
	VMULPD Y4, Y4, Y5            // t
	ALL(E5, Y6)
	ALL(E4, Y7)
	VMULPD Y6, Y5, Y6
	VADDPD Y6, Y7, Y6
	ALL(E3, Y7)
	VMULPD Y6, Y5, Y6
	VADDPD Y6, Y7, Y6
	ALL(E2, Y7)
	VMULPD Y6, Y5, Y6
	VADDPD Y6, Y7, Y6
	ALL(E1, Y7)
	VMULPD Y6, Y5, Y6
	VADDPD Y6, Y7, Y6
	VMULPD Y6, Y5, Y6
	VSUBPD Y6, Y4, Y6            // d
	VMULPD Y6, Y4, Y4            // r·d
	ALL(TWO, Y7)
	VSUBPD Y6, Y7, Y7
	VDIVPD Y7, Y4, Y4
	VSUBPD Y4, Y3, Y3
	VSUBPD Y2, Y3, Y3
	ALL(ONE, Y7)
	VSUBPD Y3, Y7, Y3            // y
	ALL(MAGIC, Y7)
	VADDPD Y7, Y1, Y1
	VPSLLQ $52, Y1, Y1
	VMULPD Y1, Y3, Y3
	VMOVUPD Y3, (DI)(AX*8)
	ADDQ $4, AX
	CMPQ AX, CX
	JLT four

done:
	MOVQ AX, done+24(FP)
	VZEROUPPER
	RET
