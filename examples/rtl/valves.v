// Three sprinkler valves: each follows its demand with a slope limit and drives its coil by pulse width.
module valve (input clk, input rst_n, input tick, input [11:0] demand, input [7:0] limit, output coil);
  reg [11:0] level;
  reg [11:0] phase;
  wire rise = demand > level;
  wire [11:0] distance = rise ? demand - level : level - demand;
  wire [11:0] stride = (distance > {4'd0, limit}) ? {4'd0, limit} : distance;
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin level <= 12'd0; phase <= 12'd0; end
    else begin
      phase <= phase + 12'd1;
      if (tick) level <= rise ? level + stride : level - stride;
    end
  assign coil = phase < level;
endmodule

module valves (input clk, input rst_n, input tick, input warn, input [11:0] wet_bulb, input [23:0] gains, input [7:0] limit, output [2:0] coil);
  wire [11:0] shortfall = warn ? (12'h140 - wet_bulb) : 12'd0;
  genvar i;
  generate for (i = 0; i < 3; i = i + 1) begin : row
    wire [19:0] product = shortfall * gains[8*i +: 8];
    valve drive (.clk(clk), .rst_n(rst_n), .tick(tick), .demand(product[19:8]), .limit(limit), .coil(coil[i]));
  end endgenerate
endmodule
