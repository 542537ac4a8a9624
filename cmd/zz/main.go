package main
import ("fmt";"os";"midrail/chain";"midrail/chain/circuit";"midrail/chain/noise";"time")
func main(){ b,_:=os.ReadFile(os.Args[1]); c,err:=chain.Read(os.Args[1],b,os.Args[2:]); if err!=nil { fmt.Println(err); return }
 n:=circuit.New(c); at,err:=n.Rest(); fmt.Println(err); for i,v:=range at.Volts { fmt.Printf("%d %s %.4f\n", i,n.Nodes[i],v)}
 for _,f:=range []float64{20,100,300,1000,2000,3000,4000,8000,20000,100000}{ h:=n.At(f).Into(n.Output).Input(1); fmt.Printf("%g %.3f dB\n", f, circuit.Gain(h*complex(n.Inputs[0].Scale,0))) }
 t0:=time.Now(); nb:=noise.At(n); fmt.Println(time.Since(t0), nb.Power, len(nb.Frequencies), nb.Ends); for _,s:=range nb.Sources[:8]{fmt.Println(s.Name,s.Kind,s.Power)}
}
