// Frost estimate: wet-bulb temperature from air temperature and humidity by a second-order filter and a chord table.
module multiply12 (input [11:0] a, input [11:0] b, output [23:0] p);
  assign p = a * b;
endmodule

module second_order (input clk, input rst_n, input step, input [11:0] x, input [11:0] b0, input [11:0] a1, output reg [11:0] y);
  wire [23:0] forward, feedback;
  reg [11:0] previous;
  multiply12 m_forward (.a(x), .b(b0), .p(forward));
  multiply12 m_feedback (.a(previous), .b(a1), .p(feedback));
  wire [12:0] sum = {1'b0, forward[23:12]} + {1'b0, feedback[23:12]};
  always @(posedge clk or negedge rst_n)
    if (!rst_n) begin y <= 12'd0; previous <= 12'd0; end
    else if (step) begin previous <= y; y <= sum[12] ? 12'hfff : sum[11:0]; end
endmodule

module chord_table (input [3:0] index, output reg [11:0] base, output reg [7:0] slope);
  always @* case (index)
    4'd0: begin base = 12'h000; slope = 8'h21; end   4'd1: begin base = 12'h021; slope = 8'h27; end
    4'd2: begin base = 12'h048; slope = 8'h2e; end   4'd3: begin base = 12'h076; slope = 8'h36; end
    4'd4: begin base = 12'h0ac; slope = 8'h3f; end   4'd5: begin base = 12'h0eb; slope = 8'h4a; end
    4'd6: begin base = 12'h135; slope = 8'h56; end   4'd7: begin base = 12'h18b; slope = 8'h64; end
    4'd8: begin base = 12'h1ef; slope = 8'h74; end   4'd9: begin base = 12'h263; slope = 8'h86; end
    4'd10: begin base = 12'h2e9; slope = 8'h9a; end  4'd11: begin base = 12'h383; slope = 8'hb1; end
    4'd12: begin base = 12'h434; slope = 8'hcb; end  4'd13: begin base = 12'h4ff; slope = 8'he8; end
    4'd14: begin base = 12'h5e7; slope = 8'hf4; end  default: begin base = 12'h6db; slope = 8'hff; end
  endcase
endmodule

module frost (input clk, input rst_n, input step, input [11:0] air, input [11:0] humidity,
              input [11:0] b0, input [11:0] a1, output [11:0] wet_bulb, output warn);
  wire [11:0] base;
  wire [7:0] slope;
  chord_table table_ (.index(air[11:8]), .base(base), .slope(slope));
  wire [15:0] chord = slope * air[7:0];
  wire [11:0] vapour = base + {4'd0, chord[15:8]};
  wire [23:0] scaled;
  multiply12 m_humid (.a(vapour), .b(humidity), .p(scaled));
  second_order smooth (.clk(clk), .rst_n(rst_n), .step(step), .x(scaled[23:12]), .b0(b0), .a1(a1), .y(wet_bulb));
  assign warn = (wet_bulb < 12'h140);
endmodule
