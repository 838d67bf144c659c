#include "textflag.h"

// Four frames from SI on, eight channels each, to channels of four samples: A gets channels 0 and 1 (four samples of
// 16 bit each), B 2 and 3, C 4 and 5, D 6 and 7. Uses X8 to X11.
#define FOUR(A, B, C, D) \
	VMOVDQU (SI), X8             \
	VMOVDQU (SI)(DX*1), X9       \
	VMOVDQU (SI)(DX*2), X10      \
	VMOVDQU (SI)(R8*1), X11      \
	LEAQ (SI)(DX*4), SI          \
	VPUNPCKLWD X9, X8, A         \ // channels 0-3, frames 0 1
	VPUNPCKHWD X9, X8, C         \ // channels 4-7
	VPUNPCKLWD X11, X10, B       \ // frames 2 3
	VPUNPCKHWD X11, X10, D       \
	VPUNPCKHLQ(A, B)             \
	VPUNPCKHLQ(C, D)

// A, B hold pairs of samples of four channels: A becomes channels 0 and 1, B channels 2 and 3.
#define VPUNPCKHLQ(A, B) \
	VPUNPCKHDQ B, A, X8 \
	VPUNPCKLDQ B, A, A  \
	VMOVDQA X8, B

// Eight samples of channels N and N+1, whose first four lie in A and last four in B.
#define GIVE(N, A, B) \
	VPUNPCKLQDQ B, A, X8         \
	VPUNPCKHQDQ B, A, X9         \
	VPMOVSXWD X8, Y8             \
	VPMOVSXWD X9, Y9             \
	MOVQ (24*N)(DI), AX          \
	VMOVDQU Y8, (AX)(BX*4)       \
	MOVQ (24*N+24)(DI), AX       \
	VMOVDQU Y9, (AX)(BX*4)

// func apart16AVX2(dst *[]int32, raw *byte, frames, stride int)
TEXT ·apart16AVX2(SB), NOSPLIT, $0-32
	MOVQ dst+0(FP), DI
	MOVQ raw+8(FP), SI
	MOVQ frames+16(FP), CX
	MOVQ stride+24(FP), DX
	LEAQ (DX)(DX*2), R8          // three frames
	XORQ BX, BX

eight:
	FOUR(X0, X1, X2, X3)
	FOUR(X4, X5, X6, X7)
	GIVE(0, X0, X4)
	GIVE(2, X1, X5)
	GIVE(4, X2, X6)
	GIVE(6, X3, X7)
	ADDQ $8, BX
	CMPQ BX, CX
	JLT eight
	VZEROUPPER
	RET
