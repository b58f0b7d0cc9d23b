package gas
import ("testing";"fmt";"math")
func TestIter(t *testing.T){ for _,g:=range []*Model{Nitrogen(),DryAir()} { for _,T:=range []float64{200,220,240,270,300,350,420}{ s:=""; for _,p:=range []float64{.05e6,1e6,3e6,5e6,10e6,15e6,20e6,30e6,40e6,50e6,60e6,70e6}{
 var iso isotherm; g.fix(&iso,T); r,_:=g.density(T,p); truth:=float64(r)/g.m
 rho:=iso.guess(p); n:=0; e0:=rho/truth-1
 for { n++; f,df:=iso.pressure(rho); st:=(f-p)/df; rho-=st; if math.Abs(st)<=1e-9*rho {break}}
 s+=fmt.Sprintf(" %d(%+.3f)",n,e0)}; t.Log(g.name,T,s)}}}
