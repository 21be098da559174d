package selection
import ("testing")
func TestDbg(t *testing.T){
 s:=newSurvey(t)
 for j:=range s.bands { c:=s.bands[j].sel.curves[0]
  t.Log(len(c.pieces), c.zlo,c.zhi,c.steep)
  for _,p:=range c.pieces { bad:=0; for _,k:=range p.inverse.cubics { if k[0]!=k[0] {bad++} }
   t.Log(p.zlo,p.zhi,p.wlo,p.whi,len(p.inverse.steps),len(p.inverse.cubics),bad) } }
 s.redshifts(); s.distances(); s.photometry()
 var cnt,fall,out,iters,eval int
 for j:=range s.bands { d:=&s.bands[j]
  for i:=range d.corrected { d.corrected[i]=d.m[i]-d.ext[i] }
  r:=&Rows{Z: s.zf, Apparent: d.corrected, Offset: d.offset, ObsRatio: s.obs, FrameRatio: s.fr}
  for i:=range s.zf { o,ok:=d.sel.object(r,i,s.st); if !ok {out++;continue}
   if o.q==1 {t.Fatal("q")}
   for _,lim:=range []float64{o.bright,o.faint} { 
    cnt++
    v:=&o.c.pieces[0].inverse
    z,slope:=v.at(lim); d:=0.0; n:=0
    for n=1;n<8;n++ { before:=z; now:=o.c.k.Value(o.q*(1+z)-1)-o.c.k.Value(z); g:=now*slope/(1+z); d=(now+g*d)/(1+g); z,slope=v.at(lim-d); dd:=z-before; if dd<0 {dd=-dd}; if !(dd>rounding*z) {break} }
    iters+=n
    if z!=z || n==8 {fall++}
   }
  } }
 t.Log(cnt,fall,out,float64(iters)/float64(cnt),eval)
}
