package spatial_test
import ("testing";"math/rand/v2";"drumlin/spatial")
func TestZZ(t *testing.T){
 p,_:=spatial.NewProjection(spatial.CRS{Method: "LAEA", Ellipsoid: "WGS 84", Lat0: 60, Lon0: 10})
 s := newStudy(targetRing(), 181, 3000, 500, rand.New(rand.NewPCG(2, 2)))
 for _,l:=range []float64{0,1,2,5,10}{
 r:=release(t,s,l,p)
 t.Log(l,r.Withheld())
 for _,g:=range r.Regions(){ t.Log(g.Content,g.ThresholdPerKM2,g.AreaKM2,g.Events,len(g.Plane)) }
 for _,g:=range r.Bands(){ t.Log(g.FromPerKM2,g.AreaKM2,g.Events,len(g.Plane)) }
 }
}
