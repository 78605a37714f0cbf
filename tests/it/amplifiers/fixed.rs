//! One fixed amplifier, for figures that must not move when the generator changes.

/// An invented two-stage amplifier for about 2.4 GHz with exactly 63 unknowns: 41 nodes and 22 branch currents.
/// Stable as terminated. The second stage is a combined pair with odd-mode resistors.
pub fn amplifier_63() -> String {
    AMPLIFIER_63.to_owned()
}

const AMPLIFIER_63: &str = "\
Two-stage amplifier for 2.4 GHz, driver and combined pair (invented)
*~ block amp63 in=in out=out band=2.2g..2.6g
.param wide=1.6

.subckt fet g d s cgs=0.9p cgd=0.07p gm=70m rds=260 cds=0.22p
+ lg=0.32n rg=1.4 ld=0.28n rd=0.9 ls=40p rs=0.35 ri=1.8
Lg  g  g1 {lg}
Rg  g1 gi {rg}
Cgs gi x  {cgs}
Ri  x  si {ri}
Cgd gi di {cgd}
Gm  di si gi x {gm}
Rds di si {rds}
Cds di si {cds}
Rd  di d1 {rd}
Ld  d1 d  {ld}
Ls  si s1 {ls}
Rs  s1 s  {rs}
.ends

* input: shunt coil, block, gate bias through a choke, stopper
Lin  in 0 4.7n
Cin  in b 6.8p
Lgb  b vb1 22n
Rlgb b vb1 390
Cgb  vb1 0 100p
Rgb  vb1 0 2.2k
Rst  b ga 8.2
Xq1  ga da 0 fet

* driver drain: choke with loss, bypass with series inductance, bead to the rail
Ld1  da vd1 5.6n
Rld1 da vd1 220
Cd1  vd1 e1 47p
Ld1e e1 0 0.5n
Lbd  vd1 rail 600n
Rbd  vd1 rail 33

* feedback round the driver, then the interstage match
Cis  da m 3.3p
Rfb  m b 680
Lis  m p 0.8n
Rg2  p vb2 180
Cg2  vb2 0 220p
Rb2  vb2 0 1.5k

* pair of wide devices with odd-mode resistors
Rsta p gb 6.8
Rstb p gc 6.8
Rodg gb gc 22
Xq2  gb db 0 fet cgs='0.9p*wide' cgd='0.07p*wide' gm='70m*wide' rds='260/wide'
+ cds='0.22p*wide' rg='1.4/wide'
Xq3  gc dc 0 fet cgs='0.9p*wide' cgd='0.07p*wide' gm='70m*wide' rds='260/wide'
+ cds='0.22p*wide' rg='1.4/wide'
Rodd db dc 27
Lca  db q 0.4n
Lcb  dc q 0.4n

* output: choke, bypass, match
Ld2  q vd2 4.7n
Rld2 q vd2 330
Cd2  vd2 e2 68p
Ld2e e2 0 0.5n
Rd2  vd2 rail 1.5
Cout q out 5.6p
Lout out 0 6.8n

* supply: lead with its loss, bulk capacitor
Cblk rail 0 10u
Lsup rail sup 80n
Rsup rail sup 0.47
Vdd  sup 0 5
.end
";
