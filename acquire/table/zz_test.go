package table
import ("testing";"os";"fmt";"encoding/json";"errors")
func TestTry(t *testing.T){
 for _, p := range []string{"s1_ten_parts.csv","s2_push_pull_20.csv","s3_audio_100.csv","s9_mixed.csv"} {
  f, err := ReadFile("/work/shared/needs-data/"+p, Options{})
  if err != nil { var e *Error; if errors.As(err,&e) {fmt.Println(err, "| hint:", e.Hint)}; continue }
  j,_ := json.MarshalIndent(f.Dialect,"","")
  fmt.Println(p, f.Layout, len(f.Sweeps), f.Points, f.Rows, string(j))
  fmt.Printf("%+v\n", f.Sweeps[0])
 }
 _ = os.Args
}
