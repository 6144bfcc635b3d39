package testdata
import ("testing")
func TestX(t *testing.T){ l,err:=Hall(); if err!=nil{t.Fatal(err)}; t.Log(len(l.Edits), len(l.Bodies), len(l.Changes[0].Edits)); for _,p:=range l.Patches(1,"a","b"){t.Log(p.BaseVersion,len(p.Edits))}}
