#include "textflag.h"

// Four rows a turn; products are rounded before they are added (no fused
// multiply-add), as the portable loops do.

// func weigh3AVX(m int, w, y, f, j0, j1, j2, buf *float64, stride int, s *lanes)
TEXT ·weigh3AVX(SB), NOSPLIT, $0-80
	MOVQ m+0(FP), CX
	MOVQ w+8(FP), SI
	MOVQ y+16(FP), R8
	MOVQ f+24(FP), R9
	MOVQ j0+32(FP), R10
	MOVQ j1+40(FP), R11
	MOVQ j2+48(FP), R12
	MOVQ buf+56(FP), DI
	MOVQ stride+64(FP), DX
	SHLQ $3, DX
	LEAQ (DI)(DX*1), R13
	LEAQ (R13)(DX*1), AX
	LEAQ (AX)(DX*1), DX
	MOVQ s+72(FP), BX
	VMOVUPD (BX), Y0
	VMOVUPD 32(BX), Y1
	VMOVUPD 64(BX), Y2
	VMOVUPD 96(BX), Y3
	XORQ BX, BX

weighloop:
	CMPQ BX, CX
	JGE  weighdone
	VMOVUPD (SI)(BX*8), Y4
	VMULPD  (R10)(BX*8), Y4, Y5
	VMULPD  (R11)(BX*8), Y4, Y6
	VMULPD  (R12)(BX*8), Y4, Y7
	VMOVUPD (R8)(BX*8), Y8
	VSUBPD  (R9)(BX*8), Y8, Y8
	VMULPD  Y8, Y4, Y8
	VMOVUPD Y5, (DI)(BX*8)
	VMOVUPD Y6, (R13)(BX*8)
	VMOVUPD Y7, (AX)(BX*8)
	VMOVUPD Y8, (DX)(BX*8)
	VMULPD  Y5, Y5, Y9
	VADDPD  Y9, Y0, Y0
	VMULPD  Y6, Y5, Y10
	VADDPD  Y10, Y1, Y1
	VMULPD  Y7, Y5, Y11
	VADDPD  Y11, Y2, Y2
	VMULPD  Y8, Y5, Y12
	VADDPD  Y12, Y3, Y3
	ADDQ $4, BX
	JMP  weighloop

weighdone:
	MOVQ s+72(FP), BX
	VMOVUPD Y0, (BX)
	VMOVUPD Y1, 32(BX)
	VMOVUPD Y2, 64(BX)
	VMOVUPD Y3, 96(BX)
	VZEROUPPER
	RET

// func fuse3AVX(m int, x, a, b, c *float64, s0, s1, s2 float64, s *lanes)
TEXT ·fuse3AVX(SB), NOSPLIT, $0-72
	MOVQ m+0(FP), CX
	MOVQ x+8(FP), SI
	MOVQ a+16(FP), R8
	MOVQ b+24(FP), R9
	MOVQ c+32(FP), R10
	VBROADCASTSD s0+40(FP), Y13
	VBROADCASTSD s1+48(FP), Y14
	VBROADCASTSD s2+56(FP), Y15
	MOVQ s+64(FP), DI
	VMOVUPD (DI), Y0
	VMOVUPD 32(DI), Y1
	VMOVUPD 64(DI), Y2
	XORQ BX, BX

fuse3loop:
	CMPQ BX, CX
	JGE  fuse3done
	VMOVUPD (SI)(BX*8), Y4
	VMULPD  Y4, Y13, Y5
	VMULPD  Y4, Y14, Y6
	VMULPD  Y4, Y15, Y7
	VMOVUPD (R8)(BX*8), Y8
	VMOVUPD (R9)(BX*8), Y9
	VMOVUPD (R10)(BX*8), Y10
	VSUBPD  Y5, Y8, Y8
	VSUBPD  Y6, Y9, Y9
	VSUBPD  Y7, Y10, Y10
	VMOVUPD Y8, (R8)(BX*8)
	VMOVUPD Y9, (R9)(BX*8)
	VMOVUPD Y10, (R10)(BX*8)
	VMULPD  Y8, Y8, Y5
	VADDPD  Y5, Y0, Y0
	VMULPD  Y9, Y8, Y6
	VADDPD  Y6, Y1, Y1
	VMULPD  Y10, Y8, Y7
	VADDPD  Y7, Y2, Y2
	ADDQ $4, BX
	JMP  fuse3loop

fuse3done:
	VMOVUPD Y0, (DI)
	VMOVUPD Y1, 32(DI)
	VMOVUPD Y2, 64(DI)
	VZEROUPPER
	RET

// func fuse2AVX(m int, x, a, b *float64, s0, s1 float64, s *lanes)
TEXT ·fuse2AVX(SB), NOSPLIT, $0-56
	MOVQ m+0(FP), CX
	MOVQ x+8(FP), SI
	MOVQ a+16(FP), R8
	MOVQ b+24(FP), R9
	VBROADCASTSD s0+32(FP), Y13
	VBROADCASTSD s1+40(FP), Y14
	MOVQ s+48(FP), DI
	VMOVUPD (DI), Y0
	VMOVUPD 32(DI), Y1
	XORQ BX, BX

fuse2loop:
	CMPQ BX, CX
	JGE  fuse2done
	VMOVUPD (SI)(BX*8), Y4
	VMULPD  Y4, Y13, Y5
	VMULPD  Y4, Y14, Y6
	VMOVUPD (R8)(BX*8), Y8
	VMOVUPD (R9)(BX*8), Y9
	VSUBPD  Y5, Y8, Y8
	VSUBPD  Y6, Y9, Y9
	VMOVUPD Y8, (R8)(BX*8)
	VMOVUPD Y9, (R9)(BX*8)
	VMULPD  Y8, Y8, Y5
	VADDPD  Y5, Y0, Y0
	VMULPD  Y9, Y8, Y6
	VADDPD  Y6, Y1, Y1
	ADDQ $4, BX
	JMP  fuse2loop

fuse2done:
	VMOVUPD Y0, (DI)
	VMOVUPD Y1, 32(DI)
	VZEROUPPER
	RET

// func fuse1AVX(m int, x, a *float64, s0 float64, s *lanes)
TEXT ·fuse1AVX(SB), NOSPLIT, $0-40
	MOVQ m+0(FP), CX
	MOVQ x+8(FP), SI
	MOVQ a+16(FP), R8
	VBROADCASTSD s0+24(FP), Y13
	MOVQ s+32(FP), DI
	VMOVUPD (DI), Y0
	XORQ BX, BX

fuse1loop:
	CMPQ BX, CX
	JGE  fuse1done
	VMOVUPD (SI)(BX*8), Y4
	VMULPD  Y4, Y13, Y5
	VMOVUPD (R8)(BX*8), Y8
	VSUBPD  Y5, Y8, Y8
	VMOVUPD Y8, (R8)(BX*8)
	VMULPD  Y8, Y8, Y5
	VADDPD  Y5, Y0, Y0
	ADDQ $4, BX
	JMP  fuse1loop

fuse1done:
	VMOVUPD Y0, (DI)
	VZEROUPPER
	RET

// func pairAVX(m int, x, p, a *float64, s0 float64, s *lanes)
TEXT ·pairAVX(SB), NOSPLIT, $0-48
	MOVQ m+0(FP), CX
	MOVQ x+8(FP), SI
	MOVQ p+16(FP), R9
	MOVQ a+24(FP), R8
	VBROADCASTSD s0+32(FP), Y13
	MOVQ s+40(FP), DI
	VMOVUPD (DI), Y0
	XORQ BX, BX

pairloop:
	CMPQ BX, CX
	JGE  pairdone
	VMOVUPD (SI)(BX*8), Y4
	VMULPD  Y4, Y13, Y5
	VMOVUPD (R8)(BX*8), Y8
	VSUBPD  Y5, Y8, Y8
	VMOVUPD Y8, (R8)(BX*8)
	VMULPD  (R9)(BX*8), Y8, Y5
	VADDPD  Y5, Y0, Y0
	ADDQ $4, BX
	JMP  pairloop

pairdone:
	VMOVUPD Y0, (DI)
	VZEROUPPER
	RET

// func dotAVX(m int, x, a *float64, s *lanes)
TEXT ·dotAVX(SB), NOSPLIT, $0-32
	MOVQ m+0(FP), CX
	MOVQ x+8(FP), SI
	MOVQ a+16(FP), R8
	MOVQ s+24(FP), DI
	VMOVUPD (DI), Y0
	XORQ BX, BX

dotloop:
	CMPQ BX, CX
	JGE  dotdone
	VMOVUPD (SI)(BX*8), Y4
	VMULPD  (R8)(BX*8), Y4, Y5
	VADDPD  Y5, Y0, Y0
	ADDQ $4, BX
	JMP  dotloop

dotdone:
	VMOVUPD Y0, (DI)
	VZEROUPPER
	RET
